package wire

import (
	"fmt"
	"net/url"
	"strconv"
	"strings"
	"time"
)

// PullQuery says what raw samples are wanted: a clip, a time span or a range of turns. One of the three.
type PullQuery struct {
	Clip     string
	From, To time.Time
	Turns    [2]int64 // first, and the one not included any more; only when End is above First
}

// Values is the query as it stands in a request.
func (q PullQuery) Values() url.Values {
	v := url.Values{}
	switch {
	case q.Clip != "":
		v.Set("clip", q.Clip)
	case q.Turns[1] > q.Turns[0]:
		v.Set("turns", fmt.Sprintf("%d:%d", q.Turns[0], q.Turns[1]))
	default:
		v.Set("from", q.From.UTC().Format(time.RFC3339Nano))
		v.Set("to", q.To.UTC().Format(time.RFC3339Nano))
	}
	return v
}

// ParsePullQuery reads it back; the error says what to write.
func ParsePullQuery(v url.Values) (q PullQuery, err error) {
	clip, turns, from, to := v.Get("clip"), v.Get("turns"), v.Get("from"), v.Get("to")
	n := 0
	for _, set := range []bool{clip != "", turns != "", from != "" || to != ""} {
		if set {
			n++
		}
	}
	if n != 1 {
		return q, fmt.Errorf("ask for one of clip=ID, turns=FIRST:END, or from=TIME and to=TIME (RFC 3339)")
	}
	switch {
	case clip != "":
		q.Clip = clip
	case turns != "":
		if q.Turns, err = ParseTurns(turns); err != nil {
			return q, err
		}
	default:
		if q.From, err = time.Parse(time.RFC3339Nano, from); err == nil {
			q.To, err = time.Parse(time.RFC3339Nano, to)
		}
		if err != nil {
			return q, fmt.Errorf("from %q to %q: write both in RFC 3339, e.g. 2031-05-04T03:02:01Z", from, to)
		}
		if !q.To.After(q.From) {
			return q, fmt.Errorf("from %q to %q: the end is not after the beginning", from, to)
		}
	}
	return q, nil
}

// ParseTurns reads FIRST:END.
func ParseTurns(s string) (t [2]int64, err error) {
	a, b, ok := strings.Cut(s, ":")
	if ok {
		if t[0], err = strconv.ParseInt(a, 10, 64); err == nil {
			t[1], err = strconv.ParseInt(b, 10, 64)
		}
	}
	if !ok || err != nil || t[0] < 0 || t[1] <= t[0] {
		return t, fmt.Errorf("%q: write FIRST:END with whole turn numbers, END above FIRST, e.g. 0:200", s)
	}
	return t, nil
}

// Pulled is the answer to a pull: files that stay as they are while they are fetched.
type Pulled struct {
	Key   string     `json:"key"`
	Files []PullFile `json:"files"`
}

// PullFile is one of them.
type PullFile struct {
	Name   string `json:"name"`
	Bytes  int64  `json:"bytes"`
	SHA256 string `json:"sha256"`
}
