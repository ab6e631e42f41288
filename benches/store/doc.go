// Package store keeps scenario sets, results, traces and records in files.
//
// Sets, results and traces are flat Parquet tables whose definitions travel
// as TOML text in the metadata, so that each is one portable file which any
// other program may read or write. Records of a lab or a vehicle come as CSV
// or Parquet.
//
// Writing: a file appears whole or not at all, and the same content gives the
// same bytes. Reading is by column name and strict: columns may stand in any
// order and be numbers of any width, decimals are scaled, a null is the
// default; what would have to be guessed (a missing identity, an unknown
// number, nesting, a truth value where a number belongs, a hash that does not
// match) is refused with the file, the column or row, what was found and what
// is allowed. So are columns packed by LZ4, which the Parquet library gives
// back wrong. A damaged file is an error, never a panic, and lengths it states
// are held against its size and row count before memory is made for them.
//
// The package reads no TOML: benches/define makes values of the texts.
package store
