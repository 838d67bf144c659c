package sensor

import (
	"context"
	"errors"
	"io"
	"math"
	"slices"
	"testing"
	"time"

	"lapwing/configs"
	"lapwing/internal/acq"
	source "lapwing/internal/acq/model"
	"lapwing/internal/frame"
	"lapwing/internal/model"
	"lapwing/internal/skid"
)

// machine loads an example skid, with one throw only unless whole: half the work.
func machine(t testing.TB, name string, whole bool) *skid.Skid {
	t.Helper()
	raw, err := configs.Files.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	sk, err := skid.Parse(name, raw)
	if err != nil {
		t.Fatal(err)
	}
	if whole {
		return sk
	}
	keep := append([]string{sk.Phase.Channel, sk.Throws[0].Ends[0].Pressure, sk.Throws[0].Ends[1].Pressure}, sk.Throws[0].Accel...)
	sk.Throws = sk.Throws[:1]
	sk.Channels = slices.DeleteFunc(sk.Channels, func(c skid.Channel) bool { return !slices.Contains(keep, c.ID) })
	for i := range sk.Channels {
		sk.Channels[i].Input = i
	}
	return sk
}

// channels lists a skid's channels as a Watch wants them.
func channels(sk *skid.Skid, info acq.Info) (out []Channel) {
	kinds := map[skid.Kind]Kind{skid.PhaseMark: Phase, skid.Pressure: Pressure, skid.Acceleration: Acceleration}
	for _, c := range sk.Channels {
		d := Channel{ID: c.ID, Input: c.Input, Kind: kinds[c.Kind], PerCount: c.VoltsFull / math.Exp2(float64(info.Bits-1)), FullV: c.VoltsFull,
			ZeroV: c.ZeroV, Gain: c.Gain, Min: c.Min, Max: c.Max, InnerDead: math.NaN()}
		for i := range sk.Throws {
			for e, end := range sk.Throws[i].Ends {
				if end.Pressure == c.ID {
					d.InnerDead = math.Mod(sk.Throws[i].DeadCentre+180*float64(e), 360)
				}
			}
		}
		out = append(out, d)
	}
	return out
}

// rig runs samples of the modelled machine through frame and Watch.
type rig struct {
	sk      *skid.Skid
	script  model.Script
	seconds float64
	seed    uint64
	block   int
	turn    func(w *Watch, f *frame.Frame) // hears of every turn; may be nil
	start   func(w *Watch)
	learn   int // 0: the default
	hold    int
	deaf    bool // the shaft reference is not asked
}

// news is a change of a channel's state.
type news struct {
	turn int64
	id   string
	s    State
}

func (r rig) run(t testing.TB) (*Watch, []news, int) {
	t.Helper()
	src, err := source.Open(r.sk, r.script, source.Options{Seed: r.seed, Duration: time.Duration(r.seconds * 1e9), BlockLen: r.block})
	if err != nil {
		t.Fatal(err)
	}
	return r.play(t, src)
}

// again runs the recorded turns over counts that may have been spoilt everywhere but in the shaft reference.
func (r rig) again(t testing.TB, info acq.Info, counts [][]int32) (*Watch, []news, int) {
	t.Helper()
	w, hear, heard := r.listen(t, info)
	turns := 0
	for _, f := range tape.frames {
		end := int(math.Ceil(f.Mark1))
		if end > len(counts[0]) {
			break
		}
		f.Counts = nil
		for _, x := range counts {
			f.Counts = append(f.Counts, x[f.Seq0:end])
		}
		turns++
		w.Frame(&f)
		if r.turn != nil {
			r.turn(w, &f)
		}
		hear()
	}
	return w, *heard, turns
}

// listen makes the Watch, and what notes its changes.
func (r rig) listen(t testing.TB, info acq.Info) (*Watch, func(), *[]news) {
	t.Helper()
	w, err := New(Config{Rate: info.Rate, Channels: channels(r.sk, info), Learn: r.learn, Hold: r.hold})
	if err != nil {
		t.Fatal(err)
	}
	if r.start != nil {
		r.start(w)
	}
	var heard []news
	was := make([]State, w.Channels())
	hear := func() {
		for i := range was {
			if s := w.State(i); s.Category != was[i].Category || s.Fault != was[i].Fault {
				if s.Category != Good || was[i].Category != FunctionCheck {
					heard = append(heard, news{w.turn, w.ID(i), s})
				}
				was[i] = s
			}
		}
	}
	return w, hear, &heard
}

func (r rig) play(t testing.TB, src acq.Source) (*Watch, []news, int) {
	t.Helper()
	defer src.Close()
	info := src.Info()
	w, hear, heard := r.listen(t, info)
	ph, _ := r.sk.ChannelByID(r.sk.Phase.Channel)
	a, err := frame.New(frame.Config{Rate: info.Rate, Inputs: info.Channels, Channel: ph.Input, Auto: true})
	if err != nil {
		t.Fatal(err)
	}
	turns := 0
	emit := func(f *frame.Frame) {
		turns++
		w.Frame(f)
		if r.turn != nil {
			r.turn(w, f)
		}
		hear()
	}
	var b acq.Block
	for {
		err := src.Read(context.Background(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatal(err)
		}
		if err := a.Add(&b, emit); err != nil {
			t.Fatal(err)
		}
		if !r.deaf {
			w.Reference(a.Status(), b.Seq0+int64(b.N))
			hear()
		}
	}
	return w, *heard, turns
}

// swing moves speed, lines and load step about, with a stop and a start when asked.
func swing(sk *skid.Skid, seconds float64) model.Script {
	l := sk.Process.Stages[0]
	s := model.Script{}
	duty := [][4]float64{{1, 1, 1, 0}, {1.2, 0.95, 1, 1}, {0.8, 1.1, 1.15, 0}, {1, 1, 0.8, 2}, {1.3, 1, 0.7, 2}, {0.75, 0.9, 1, 3}, {1, 1.1, 1.2, 0}}
	for k := 1; float64(4*k) < seconds; k++ {
		d := duty[k%len(duty)]
		at := float64(4 * k)
		s = s.Add(at, 2, model.DischargePressure, "", l.Pd*d[0]).Add(at, 2, model.SuctionPressure, "", l.Ps*d[1]).
			Add(at, 3, model.Speed, "", sk.Machine.RatedRPM*d[2])
		if code := int(d[3]); code < len(sk.Steps) {
			ok := true
			for name := range sk.Steps[code].Idle {
				found := false
				for i := range sk.Throws {
					for e := range sk.Throws[i].Ends {
						found = found || sk.EndName(i, e) == name
					}
				}
				ok = ok && found
			}
			if ok {
				s = s.Add(at+2, 0, model.LoadStep, "", float64(sk.Steps[code].Code))
			}
		}
	}
	return s
}
