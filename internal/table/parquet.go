package table

import (
	"bufio"
	"errors"
	"os"
	"slices"
	"time"

	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/compress/zstd"
)

const (
	groupRows = 100_000 // rows of a row group
	batchRows = 1024
)

type parquetSheet struct {
	f     *os.File
	buf   *bufio.Writer
	w     *parquet.GenericWriter[any] // rows by the schema given
	place []int                       // of each of our columns among the file's, which are in order of name
	rows  []parquet.Row
	n     int // in the row group
}

func newParquet(f *os.File, at *Place, cols []Column) (sheet, error) {
	group := parquet.Group{}
	names := make([]string, len(cols))
	for i, c := range cols {
		names[i] = c.Name
		group[c.Name] = parquet.Optional(leaf(c.Type))
	}
	sorted := slices.Sorted(slices.Values(names))
	options := []parquet.WriterOption{parquet.NewSchema(at.Name, group), parquet.Compression(&zstd.Codec{}), parquet.CreatedBy("lapwing", "", "")}
	keys := make([]string, 0, len(at.About))
	for k := range at.About {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	for _, k := range keys {
		options = append(options, parquet.KeyValueMetadata(k, at.About[k]))
	}
	for _, c := range cols {
		if c.Note != "" {
			options = append(options, parquet.KeyValueMetadata("column "+c.Name, c.Note))
		}
	}
	s := &parquetSheet{f: f, buf: bufio.NewWriterSize(f, 1<<16)}
	for _, n := range names {
		s.place = append(s.place, slices.Index(sorted, n))
	}
	s.w = parquet.NewGenericWriter[any](s.buf, options...)
	return s, nil
}

func leaf(t Type) parquet.Node {
	switch t {
	case Whole:
		return parquet.Int(64)
	case Text:
		return parquet.Encoded(parquet.String(), &parquet.RLEDictionary)
	case Instant:
		return parquet.Timestamp(parquet.Nanosecond)
	}
	return parquet.Leaf(parquet.DoubleType)
}

func (s *parquetSheet) row(values []any) error {
	row := make(parquet.Row, len(values))
	for i, v := range values {
		var x parquet.Value
		level := 1
		switch v := v.(type) {
		case nil:
			level = 0
		case float64:
			x = parquet.DoubleValue(v)
		case int64:
			x = parquet.Int64Value(v)
		case string:
			x = parquet.ByteArrayValue([]byte(v))
		case time.Time:
			x = parquet.Int64Value(v.UnixNano())
		}
		row[s.place[i]] = x.Level(0, level, s.place[i])
	}
	s.rows = append(s.rows, row)
	if len(s.rows) < batchRows {
		return nil
	}
	return s.push()
}

func (s *parquetSheet) push() error {
	if _, err := s.w.WriteRows(s.rows); err != nil {
		return err
	}
	s.n += len(s.rows)
	s.rows = s.rows[:0]
	if s.n < groupRows {
		return nil
	}
	s.n = 0
	return s.w.Flush()
}

func (s *parquetSheet) close() error {
	return errors.Join(s.push(), s.w.Close(), s.buf.Flush(), s.f.Close())
}
