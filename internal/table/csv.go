package table

import (
	"bufio"
	"encoding/csv"
	"errors"
	"os"
	"strconv"
	"time"
)

type csvSheet struct {
	f   *os.File
	buf *bufio.Writer
	w   *csv.Writer
	rec []string
}

func newCSV(f *os.File, cols []Column) (sheet, error) {
	buf := bufio.NewWriterSize(f, 1<<16)
	s := &csvSheet{f: f, buf: buf, w: csv.NewWriter(buf), rec: make([]string, len(cols))}
	for i, c := range cols {
		s.rec[i] = c.Name
	}
	return s, s.w.Write(s.rec)
}

func (s *csvSheet) row(values []any) error {
	for i, v := range values {
		switch x := v.(type) {
		case nil:
			s.rec[i] = ""
		case float64:
			s.rec[i] = strconv.FormatFloat(x, 'g', -1, 64) // reads back to the last bit
		case int64:
			s.rec[i] = strconv.FormatInt(x, 10)
		case string:
			s.rec[i] = x
		case time.Time:
			s.rec[i] = x.UTC().Format(time.RFC3339Nano)
		}
	}
	return s.w.Write(s.rec)
}

func (s *csvSheet) close() error {
	s.w.Flush()
	return errors.Join(s.w.Error(), s.buf.Flush(), s.f.Close())
}
