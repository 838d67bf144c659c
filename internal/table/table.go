package table

import (
	"errors"
	"fmt"
	"math"
	"net/url"
	"os"
	"path/filepath"
	"time"
)

// Type is what a column holds.
type Type uint8

// The types, and the Go type of their values in a row; nil is a value that is not known.
const (
	Number  Type = iota // float64; NaN and infinities are not known
	Whole               // int64
	Text                // string
	Instant             // time.Time, written in UTC; the zero time is not known
)

// Column is one column of a table. The unit is in its name.
type Column struct {
	Name string
	Type Type
	Note string // one line for people, kept in Parquet's metadata
}

// Format is a file format.
type Format string

// The formats.
const (
	CSV     Format = "csv"
	Parquet Format = "parquet"
)

// Place says where a table's files go and what they are called.
type Place struct {
	Dir        string // made when it is not there
	Site, Skid string // partitions; a site that is not stated is "unknown"
	Name       string // table: measures, alarms, angles, samples
	File       string // base name of the files, without ending: tells one recording from another
	Format     Format
	About      map[string]string // kept in Parquet's metadata
}

// Table is a table being written: one file a day (UTC).
type Table struct {
	at    Place
	cols  []Column
	day   string
	file  sheet
	files []string
	rows  int64
}

// sheet is one open file.
type sheet interface {
	row(values []any) error
	close() error
}

// New prepares a table; nothing is written before the first row.
func New(at Place, cols []Column) (*Table, error) {
	if at.Format != CSV && at.Format != Parquet {
		return nil, fmt.Errorf("table: no format %q: csv or parquet", at.Format)
	}
	if at.Name == "" || at.Skid == "" || at.File == "" || filepath.Base(at.File) != at.File {
		return nil, errors.New("table: name, skid and a plain file name must be given")
	}
	if at.Site == "" {
		at.Site = "unknown"
	}
	seen := map[string]bool{}
	for _, c := range cols {
		if c.Name == "" || seen[c.Name] {
			return nil, fmt.Errorf("table: %s has column %q twice or without a name", at.Name, c.Name)
		}
		seen[c.Name] = true
	}
	return &Table{at: at, cols: cols}, nil
}

// Row writes one row; at decides on the day's file.
func (t *Table) Row(at time.Time, values ...any) error {
	if len(values) != len(t.cols) {
		return fmt.Errorf("table: %s: %d values for %d columns", t.at.Name, len(values), len(t.cols))
	}
	for i, v := range values {
		var err error
		if values[i], err = fit(t.cols[i], v); err != nil {
			return fmt.Errorf("table: %s: %w", t.at.Name, err)
		}
	}
	if day := at.UTC().Format(time.DateOnly); day != t.day {
		if err := t.open(day); err != nil {
			return err
		}
	}
	t.rows++
	if err := t.file.row(values); err != nil {
		return fmt.Errorf("table: %s: %w", t.files[len(t.files)-1], err)
	}
	return nil
}

// fit makes what is not known nil and checks the rest.
func fit(c Column, v any) (any, error) {
	ok := v == nil
	switch x := v.(type) {
	case float64:
		if ok = c.Type == Number; math.IsNaN(x) || math.IsInf(x, 0) {
			v = nil
		}
	case *float64:
		ok = c.Type == Number
		if v = nil; x != nil && !math.IsNaN(*x) && !math.IsInf(*x, 0) {
			v = *x
		}
	case int64:
		ok = c.Type == Whole
	case string:
		ok = c.Type == Text
	case time.Time:
		if ok = c.Type == Instant; x.IsZero() {
			v = nil
		}
	}
	if !ok {
		return nil, fmt.Errorf("column %s cannot hold a %T", c.Name, v)
	}
	return v, nil
}

func (t *Table) open(day string) error {
	if err := t.shut(); err != nil {
		return err
	}
	dir := filepath.Join(t.at.Dir, t.at.Name, "site="+url.PathEscape(t.at.Site), "skid="+url.PathEscape(t.at.Skid), "date="+day)
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return fmt.Errorf("table: %w", err)
	}
	path := filepath.Join(dir, t.at.File+"."+string(t.at.Format))
	f, err := os.Create(path)
	if err != nil {
		return fmt.Errorf("table: %w", err)
	}
	t.day, t.files = day, append(t.files, path)
	if t.at.Format == CSV {
		t.file, err = newCSV(f, t.cols)
	} else {
		t.file, err = newParquet(f, &t.at, t.cols)
	}
	if err != nil {
		return fmt.Errorf("table: %s: %w", path, errors.Join(err, f.Close()))
	}
	return nil
}

func (t *Table) shut() error {
	if t.file == nil {
		return nil
	}
	err := t.file.close()
	t.file, t.day = nil, ""
	if err != nil {
		return fmt.Errorf("table: %s: %w", t.files[len(t.files)-1], err)
	}
	return nil
}

// Close finishes the last file.
func (t *Table) Close() error { return t.shut() }

// Files are the files written so far, in order.
func (t *Table) Files() []string { return t.files }

// Rows is the number of rows written.
func (t *Table) Rows() int64 { return t.rows }
