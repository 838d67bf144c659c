package plant

import (
	"errors"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"strings"
	"testing"
	"testing/iotest"
	"time"

	"pgregory.net/rapid"

	"lapwing/internal/skid"
)

func machine(t testing.TB, file string) *skid.Skid {
	t.Helper()
	sk, err := skid.Load(filepath.Join("..", "..", "configs", file))
	if err != nil {
		t.Fatal(err)
	}
	return sk
}

func read(t testing.TB, sk *skid.Skid, rows string) *Series {
	t.Helper()
	s, err := ReadCSV(strings.NewReader(rows), sk)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

const twoRows = `# written by hand
time_s,load_step,s1_p_suction_bar_abs,s1_p_discharge_bar_gauge,s1_t_suction_c,t1_he_d2_cover_c
0,0,8.0,21.0,20,95
10.5,1,8.2,,21.5,
`

func TestARowHoldsUntilTheNext(t *testing.T) {
	sk := machine(t, "biomethane-two-throw.yaml")
	s := read(t, sk, twoRows)
	for name, c := range map[string]struct {
		t, ps, pd, ts, cover float64
		step                 int
		age                  time.Duration
	}{
		"at the first row":       {0, 8e5, 21e5 + 101300, 293.15, 368.15, 0, 0},
		"between the rows":       {10.4, 8e5, 21e5 + 101300, 293.15, 368.15, 0, 10400 * time.Millisecond},
		"at the second row":      {10.5, 8.2e5, math.NaN(), 294.65, math.NaN(), 1, 0},
		"long after the last":    {70.5, 8.2e5, math.NaN(), 294.65, math.NaN(), 1, time.Minute},
		"before the first, file": {-1, 8e5, 22e5, 293.15, math.NaN(), 0, 0},
	} {
		p := s.At(c.t)
		l := p.Stages[0]
		got, ok := p.Covers["t1.he.d2"]
		if !ok {
			got = math.NaN()
		}
		for what, v := range map[string][2]float64{"ps": {l.Ps, c.ps}, "pd": {l.Pd, c.pd}, "ts": {l.Ts, c.ts}, "cover": {got, c.cover}} {
			if math.IsNaN(v[0]) != math.IsNaN(v[1]) || math.Abs(v[0]-v[1]) > 1e-6 {
				t.Errorf("%s: %s is %g, want %g", name, what, v[0], v[1])
			}
		}
		if d := p.Age - c.age; p.Step != c.step || d < -time.Microsecond || d > time.Microsecond || !p.Known {
			t.Errorf("%s: step %d age %s known %v", name, p.Step, p.Age, p.Known)
		}
	}
	if first, last, ok := s.Span(); first != 0 || last != 10.5 || !ok || s.Rows() != 2 {
		t.Errorf("span %g to %g, %v, %d rows", first, last, ok, s.Rows())
	}
}

func TestFixedValuesAreTheFilesAndTheCallersOwn(t *testing.T) {
	sk := machine(t, "biomethane-two-throw.yaml")
	s := Fixed(sk)
	p := s.At(1e9)
	if !p.Known || p.Age != 0 || p.Stages[0].Ps != sk.Process.Stages[0].Ps || p.Stages[0].Pd != sk.Process.Stages[0].Pd || !math.IsNaN(p.Stages[0].Td) {
		t.Errorf("fixed values %+v", p)
	}
	p.Stages[0].Ps = 1
	if s.At(0).Stages[0].Ps != 8e5 || sk.Process.Stages[0].Ps != 8e5 {
		t.Error("a caller's change reached the source")
	}
	if _, _, ok := s.Span(); ok {
		t.Error("fixed values have no span")
	}
}

func TestWithNothingKnownNothingIsMadeUp(t *testing.T) {
	file := machine(t, "biomethane-two-throw.yaml")
	raw, _, _ := strings.Cut(string(file.Raw), "\nprocess:")
	_, rest, _ := strings.Cut(string(file.Raw), "\ndetection:")
	sk, err := skid.Parse("m.yaml", []byte(raw+"\ndetection:"+rest))
	if err != nil {
		t.Fatal(err)
	}
	s := read(t, sk, "time_s,load_step,s1_p_suction_bar_abs\n5,2,\n6,,8\n")
	if p := s.At(0); p.Known || p.Stages != nil || p.Step != 0 {
		t.Errorf("before the first row: %+v", p)
	}
	if p := s.At(5); p.Known || p.Stages != nil || p.Step != 2 {
		t.Errorf("a row with only a load step: %+v", p)
	}
	if p := s.At(6); !p.Known || len(p.Stages) != 1 || p.Stages[0].Ps != 8e5 || !math.IsNaN(p.Stages[0].Pd) || p.Step != 0 {
		t.Errorf("a row with a suction pressure: %+v", p)
	}
}

func TestTwoStagesAndEveryColumn(t *testing.T) {
	sk := machine(t, "hydrogen-makeup.yaml")
	cols := Columns(sk)
	if want := 1 + 1 + 2*4 + 20; len(cols) != want || cols[0] != "time_s" || cols[len(cols)-1] != "t2_ce_d2_cover_c" {
		t.Fatalf("%d columns, want %d: %v", len(cols), want, cols)
	}
	cells := make([]string, len(cols))
	for i, c := range cols {
		switch {
		case c == "time_s", c == "load_step":
			cells[i] = "1"
		default:
			cells[i] = fmt.Sprint(30 + i)
		}
	}
	p := read(t, sk, strings.Join(cols, ",")+"\r\n"+strings.Join(cells, ",")+"\r\n").At(2)
	if len(p.Covers) != 20 || len(p.Stages) != 2 || math.Abs(p.Stages[1].Td-(30+9+273.15)) > 1e-9 || p.Step != 1 {
		t.Errorf("read %+v", p)
	}
}

func TestEachMistakeIsNamedWithItsLine(t *testing.T) {
	sk := machine(t, "biomethane-two-throw.yaml")
	for name, c := range map[string]struct{ rows, says string }{
		"empty":                  {"", "the file is empty"},
		"only a header":          {"time_s\n", "no row"},
		"no time":                {"load_step\n0\n", "line 1: column time_s is missing"},
		"an unknown column":      {"time_s,s2_p_suction_bar_abs\n0,1\n", `line 1: column "s2_p_suction_bar_abs" is unknown`},
		"an unstated reference":  {"time_s,s1_p_suction_bar\n0,1\n", "s1_p_suction_bar_abs or s1_p_suction_bar_gauge"},
		"semicolons":             {"time_s;load_step\n0;1\n", "separate the columns with commas"},
		"the time twice":         {"time_s,time_s\n0,0\n", "line 1: column time_s stands twice"},
		"a column twice":         {"time_s,load_step,load_step\n0,0,0\n", "line 1: column load_step gives what load_step gives already"},
		"absolute and gauge":     {"time_s,s1_p_suction_bar_abs,s1_p_suction_bar_gauge\n0,8,7\n", "keep one"},
		"a word":                 {"time_s,load_step\n0,0\n1,full\n", `line 3: column load_step: "full" is not a number`},
		"not a number":           {"time_s,s1_t_suction_c\n0,NaN\n", `line 2: column s1_t_suction_c: "NaN" is not a number`},
		"time standing still":    {"time_s,load_step\n# note\n0,0\n0,1\n", "line 4: column time_s: 0 s does not come after"},
		"a step not in the file": {"time_s,load_step\n0,9\n", "line 2: column load_step: the skid file has no load step 9"},
		"half a step":            {"time_s,load_step\n0,0.5\n", "line 2: column load_step: the skid file has no load step 0.5"},
		"a pressure in kPa":      {"time_s,s1_p_suction_bar_abs\n0,8000\n", "line 2: column s1_p_suction_bar_abs: 8000 is outside"},
		"a cell too few":         {"time_s,load_step\n0\n", "line 2: 1 cells, the header has 2 columns"},
		"an open quote":          {"time_s,load_step\n0,\"1\n", "parse error"},
	} {
		s, err := ReadCSV(strings.NewReader(c.rows), sk)
		if err == nil || s != nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: got %v, want %q", name, err, c.says)
		}
	}
	_, err := ReadCSV(strings.NewReader("time_s,load_step\n"+strings.Repeat("x,y\n", 1000)), sk)
	if n := strings.Count(err.Error(), "\n") + 1; n < mostErrors || n > mostErrors+2 {
		t.Errorf("%d mistakes reported of a thousand bad rows", n)
	}
}

func TestAByteOrderMarkDoesNotHideTheTime(t *testing.T) {
	if s := read(t, machine(t, "biomethane-two-throw.yaml"), "\ufefftime_s, load_step\n0, 3\n"); s.At(0).Step != 3 {
		t.Error("not read")
	}
}

func TestAReadErrorIsPassedOn(t *testing.T) {
	sk := machine(t, "biomethane-two-throw.yaml")
	broken := errors.New("disk gone")
	for _, head := range []string{"", "time_s\n0\n"} {
		if _, err := ReadCSV(io.MultiReader(strings.NewReader(head), iotest.ErrReader(broken)), sk); !errors.Is(err, broken) {
			t.Errorf("after %q: %v", head, err)
		}
	}
}

// TestAtFindsTheRowThatASearchFromTheStartFinds compares At with the plain definition of "last row at or before".
func TestAtFindsTheRowThatASearchFromTheStartFinds(t *testing.T) {
	sk := machine(t, "biomethane-two-throw.yaml")
	rapid.Check(t, func(rt *rapid.T) {
		steps := rapid.SliceOfN(rapid.IntRange(1, 1000), 1, 30).Draw(rt, "gaps, ms")
		var b strings.Builder
		b.WriteString("time_s,s1_p_suction_bar_abs\n")
		ms, at := 0, []int{}
		for i, g := range steps {
			ms += g
			at = append(at, ms)
			fmt.Fprintf(&b, "%.3f,%d\n", float64(ms)/1e3, i+1)
		}
		s, err := ReadCSV(strings.NewReader(b.String()), sk)
		if err != nil {
			rt.Fatal(err)
		}
		ask := rapid.IntRange(-10, ms+2000).Draw(rt, "time, ms")
		want := 8e5 // the skid file's
		for i := range at {
			if at[i] <= ask {
				want = float64(i+1) * 1e5
			}
		}
		if got := s.At(float64(ask) / 1e3).Stages[0].Ps; math.Abs(got-want) > 1e-6 {
			rt.Errorf("at %d ms of %v: %g, want %g", ask, at, got, want)
		}
	})
}

// FuzzReadCSV: whatever the bytes, there is a series with rows in order or an error.
func FuzzReadCSV(f *testing.F) {
	sk := machine(f, "fast-small.yaml")
	for _, s := range []string{"", twoRows, "time_s\n0\n1\n", "time_s,s1_p_suction_bar_abs\n-1,\n1e308,4000\n", "\"time_s\"\n\"0\"\n", "time_s,\n", "\xff\n", "#\n#\n"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, rows string) {
		s, err := ReadCSV(strings.NewReader(rows), sk)
		if (s == nil) == (err == nil) {
			t.Fatal("neither a series nor an error")
		}
		if s == nil {
			return
		}
		first, last, ok := s.Span()
		if !ok || first > last {
			t.Fatalf("span %g to %g", first, last)
		}
		for _, at := range []float64{math.Inf(-1), first, last, math.Inf(1), math.NaN()} {
			p := s.At(at)
			if p.Age < 0 || len(p.Stages) != 2 {
				t.Errorf("at %g: %+v", at, p)
			}
		}
	})
}
