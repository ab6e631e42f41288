// Package interop holds no code, only tests: files of the store are read
// back value for value by another Parquet implementation, DuckDB, and sets that DuckDB
// wrote run through the store. It is a module of its own, so that the
// bench itself is built without cgo.
package interop
