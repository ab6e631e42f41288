package store

// Kind returns the format a Parquet file says it has in its metadata, such as
// soctrial/set/1; empty where it says none, as a record does.
func Kind(path string) (string, error) {
	var kind string
	err := withTable(path, func(t *table) error {
		kind = t.meta[formatKey]
		return nil
	})
	return kind, err
}
