package station

import (
	"context"
	"errors"
	"math"
	"os"
	"path/filepath"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	"lapwing/internal/duty"
	"lapwing/internal/panel"
)

// Pictures are made while somebody asks, of the newest turn, and not more often than said; nobody asking costs nothing.
func TestPicturesOnDemand(t *testing.T) {
	o := journalled(t, orderStart)
	o.Source, o.Start = "model:grow", orderStart.Add(time.Hour)
	h := byHand(t, o)
	h.turns(t, 12)
	for i := range h.gallery.looks {
		if h.gallery.looks[i].shown.Load() != nil {
			t.Error("a picture that nobody asked for")
		}
	}
	if h.Look("t1") != nil || h.Look("no such") != nil {
		t.Error("a picture before the turn that it is of")
	}
	h.turns(t, 1)
	l := h.Look("t1")
	if l == nil || l.Throw != "t1" || l.Picture.Ends[0] == nil || len(l.Picture.Vib) == 0 || len(l.Measures) < 50 || l.Against == "" || l.Record == nil || l.Record.ID != "t1" || len(l.Record.Ends) != 2 {
		t.Fatalf("%+v", l)
	}
	if h.gallery.looks[1].shown.Load() != nil {
		t.Error("a picture of a throw that nobody asked for")
	}
	h.gallery.looks[0].made = time.Now().Add(time.Hour) // as if it had just been made
	h.turns(t, 3)
	if m := h.Look("t1"); m != l {
		t.Errorf("one more picture too soon: of turn %d after %d", m.Turn, l.Turn)
	}
	h.gallery.looks[0].made = time.Time{}
	h.turns(t, 1)
	if m := h.Look("t1"); m.Turn != l.Turn+4 {
		t.Errorf("of turn %d after %d", m.Turn, l.Turn)
	}
	h.gallery.looks[0].asked.Store(notAsked)
	if m := h.Look("t1"); m != nil {
		t.Errorf("a picture of turn %d, of when somebody last looked", m.Turn)
	}
	if got := h.Throws(); len(got) != 2 || got[1].ID != "t2" || len(got[1].Ends) != 2 || len(got[1].Channels) != 3 {
		t.Errorf("throws %+v", got)
	}
}

// The newest second of a channel is its samples, scaled, without a gap.
func TestSignalIsTheNewestSecond(t *testing.T) {
	o := journalled(t, orderStart)
	o.Source, o.Start = "model:grow", orderStart.Add(time.Hour)
	h := byHand(t, o)
	if h.Signal("a1") != nil || h.Signal("no such") != nil {
		t.Error("a signal before anything has come")
	}
	rate := int64(h.info.Rate)
	n := int(rate / 10)
	feed := func(seq, lost int64) {
		b := acq.Block{Seq0: seq, N: n, Lost: lost, Counts: make([][]int32, h.info.Channels)}
		for c := range b.Counts {
			b.Counts[c] = make([]int32, n)
			for i := range b.Counts[c] {
				b.Counts[c][i] = int32((seq + int64(i)) % 1000)
			}
		}
		h.gallery.spread = time.Time{}
		h.overhear(&b)
	}
	for k := range int64(9) {
		feed(k*int64(n), 0)
	}
	if h.Signal("a1") != nil {
		t.Error("less than a second is handed over")
	}
	for k := int64(9); k < 25; k++ {
		feed(k*int64(n), 0)
	}
	s := h.Signal("a1")
	if s == nil || s.Unit != "g" || int64(len(s.V)) < rate || int64(len(s.V)) > rate+int64(n) || s.Seq0 != 25*int64(n)-int64(len(s.V)) {
		t.Fatalf("%+v", s)
	}
	ch, _ := h.sk.ChannelByID("a1")
	gain, offset := ch.Scale(h.info.Bits)
	for i, v := range s.V {
		if want := (float64((s.Seq0+int64(i))%1000)*gain + offset) / 9.80665; math.Abs(v-want) > 1e-9*math.Abs(want)+1e-12 {
			t.Fatalf("sample %d is %g g, not %g", i, v, want)
		}
	}
	feed(40*int64(n), int64(15*n))
	if g := h.gallery.recent; len(g) != 1 || g[0].Seq0 != 40*int64(n) {
		t.Errorf("across a gap: %d blocks", len(g))
	}
	h.gallery.raw.Store(notAsked)
	feed(41*int64(n), 0)
	if h.gallery.recent != nil || h.gallery.heard.Load() != nil {
		t.Error("samples are kept while nobody looks")
	}
}

func TestNoReferenceClipYet(t *testing.T) {
	h := byHand(t, journalled(t, orderStart))
	if _, err := h.Reference(context.Background(), "t1"); !errors.Is(err, panel.ErrNoReference) {
		t.Errorf("%v", err)
	}
}

// What one picture of one throw costs the line; at most two a second and throw are made, while somebody looks.
func BenchmarkLook(b *testing.B) {
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		b.Fatal(err)
	}
	dir := b.TempDir()
	file := filepath.Join(dir, "skid.yaml")
	if err := os.WriteFile(file, raw, 0o644); err != nil {
		b.Fatal(err)
	}
	s, err := Open(Options{SkidFile: file, State: dir, Source: "model:standing", Listen: "none", Fast: true})
	if err != nil {
		b.Fatal(err)
	}
	defer s.Close()
	h := newHeld()
	s.line.proc = h.at
	var clock rowClock
	var blk acq.Block
	var devs []duty.Deviation
	good, done := 0, false
	for !done {
		if err := s.src.Read(context.Background(), &blk); err != nil {
			b.Fatal(err)
		}
		for _, r := range clock.rows(&blk, s.info.Rate, s.proc) {
			h.put(r)
		}
		err := s.line.Add(&blk, func(o *Output) {
			if o.Turn == nil || !o.Turn.Valid() || done {
				return
			}
			if good++; good < 12 {
				return
			}
			done = true
			b.ReportAllocs()
			for b.Loop() {
				if s.line.lookAt(o, 0, &devs) == nil {
					b.Fatal("no picture")
				}
			}
		})
		if err != nil {
			b.Fatal(err)
		}
	}
}
