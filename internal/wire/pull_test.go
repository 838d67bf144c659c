package wire_test

import (
	"net/url"
	"testing"
	"time"

	"lapwing/internal/wire"
)

// What is asked reads back as it was meant, and anything else is refused.
func TestPullQuery(t *testing.T) {
	at := time.Date(2031, 5, 4, 3, 2, 1, 5, time.UTC)
	for _, q := range []wire.PullQuery{{Clip: "a-1"}, {Turns: [2]int64{3, 9}}, {From: at, To: at.Add(time.Second)}} {
		got, err := wire.ParsePullQuery(q.Values())
		if err != nil || got != q {
			t.Errorf("%+v: %+v %v", q, got, err)
		}
	}
	for _, bad := range []string{"", "clip=a&turns=1:2", "turns=5", "turns=5:5", "turns=-1:4", "turns=1:x", "from=2031-05-04T03:02:01Z", "from=yesterday&to=today",
		"from=2031-05-04T03:02:01Z&to=2031-05-04T03:02:01Z"} {
		v, err := url.ParseQuery(bad)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := wire.ParsePullQuery(v); err == nil {
			t.Errorf("%q was taken", bad)
		}
	}
}

func FuzzPullQuery(f *testing.F) {
	f.Add("turns=3:9")
	f.Add("from=2031-05-04T03:02:01Z&to=2031-05-04T03:02:02Z")
	f.Fuzz(func(t *testing.T, s string) {
		v, err := url.ParseQuery(s)
		if err != nil {
			return
		}
		q, err := wire.ParsePullQuery(v)
		if err != nil {
			return
		}
		if again, err := wire.ParsePullQuery(q.Values()); err != nil || again.Turns != q.Turns || again.Clip != q.Clip || !again.From.Equal(q.From) || !again.To.Equal(q.To) {
			t.Errorf("%q: %+v, again %+v %v", s, q, again, err)
		}
	})
}
