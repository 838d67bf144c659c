// Package table writes results as tables that other programs open: CSV, and Parquet in folders that a query engine takes
// as partitions, site=…/skid=…/date=…
//
//	Needs: columns, then rows in order of time.
//	Waits: a row group (some thousand rows) in Parquet.
//	Emits: files; a table without rows has none. A value that is not known is an empty field in CSV and a null in Parquet, never NaN.
//	It gives an error with the file's name when the disk refuses or a row does not fit its columns.
//
// Parquet is in the hand tool only: the daemon does not carry it.
package table
