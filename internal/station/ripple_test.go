package station

import (
	"bytes"
	"errors"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"lapwing/configs"
	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/skid"
)

const (
	wheelRate  = 20480.0
	wheelInput = 7    // beside the example's seven
	wheelAt    = 52.5 // degrees of the phase mark after the wheel's mark 0
)

// toothed writes a recording of the example machine with a temporary 60-2 wheel on an eighth input. The shaft turns
// with the ripple of each stretch, θ from the phase mark, integrated by the midpoint rule; a stretch is a load step.
func toothed(t *testing.T, rpm float64, seconds float64, steps []int, ripples map[int][]skid.Ripple) (wavFile, csvFile string) {
	t.Helper()
	dir := t.TempDir()
	wavFile, csvFile = filepath.Join(dir, "wheel.wav"), filepath.Join(dir, "process.csv")
	w, err := wav.Create(wavFile, wav.WriterOptions{Rate: wheelRate, Channels: wheelInput + 1, Bits: 16})
	if err != nil {
		t.Fatal(err)
	}
	rad := math.Pi / 180
	deg := 300.0                               // after the phase mark
	pulse := func(after, wide float64) int32 { // mid-level exactly at the edge
		const half = 0.5
		up, down := (after+half)/(2*half), (wide+half-after)/(2*half)
		return int32(26000*math.Min(1, math.Max(0, math.Min(up, down)))) - 3000
	}
	rows := "time_s,load_step,s1_p_suction_bar_abs,s1_p_discharge_bar_abs,s1_t_suction_c\n"
	each := seconds / float64(len(steps))
	for second := 0; float64(second) < seconds; second++ {
		b := acq.Block{Seq0: int64(float64(second) * wheelRate), N: int(wheelRate)}
		b.Counts = make([][]int32, wheelInput+1)
		for i := range b.Counts {
			b.Counts[i] = make([]int32, b.N)
		}
		step := steps[int(float64(second)/each)]
		rows += strings.Join([]string{strconv.Itoa(second), strconv.Itoa(step), "8", "22", "20"}, ",") + "\n"
		w0 := 6 * rpm / wheelRate
		speed := func(d float64) float64 {
			k := 1.0
			for _, h := range ripples[step] {
				k += h.Amp * math.Cos((float64(h.Order)*d-h.Phase)*rad)
			}
			return w0 * k
		}
		for i := range b.N {
			a := math.Mod(deg, 360)
			b.Counts[0][i] = pulse(math.Mod(a+180, 360)-180, 4)
			onWheel := math.Mod(deg+wheelAt, 360)
			near := math.Mod(onWheel+3, 6) - 3 // after the nearest tooth
			b.Counts[wheelInput][i] = -3000
			if tooth := math.Round((onWheel - near) / 6); tooth < 58 || tooth == 60 {
				b.Counts[wheelInput][i] = pulse(near, 2.4)
			}
			deg += speed(deg + speed(deg)/2)
		}
		if err := w.Write(&b); err != nil {
			t.Fatal(err)
		}
	}
	if err := errors.Join(w.Close(), os.WriteFile(csvFile, []byte(rows), 0o644)); err != nil {
		t.Fatal(err)
	}
	return wavFile, csvFile
}

func skidFile(t *testing.T, edit func(string) string) string {
	t.Helper()
	raw, err := configs.Files.ReadFile("biomethane-two-throw.yaml")
	if err != nil {
		t.Fatal(err)
	}
	name := filepath.Join(t.TempDir(), "skid.yaml")
	if err := os.WriteFile(name, []byte(edit(string(raw))), 0o644); err != nil {
		t.Fatal(err)
	}
	return name
}

func same(s string) string { return s }

var shaftRipple = map[int][]skid.Ripple{
	0: {{Order: 1, Amp: 0.004, Phase: 25}, {Order: 2, Amp: 0.012, Phase: 70}},
	2: {{Order: 1, Amp: 0.009, Phase: 140}, {Order: 2, Amp: 0.006, Phase: -60}, {Order: 3, Amp: 0.002, Phase: 10}},
}

// From a recording with a temporary wheel to the lines of the skid file and back: what is pasted is the shaft's ripple,
// per load step, counted from the phase reference and not from the wheel.
func TestRippleToolGivesLinesThatParse(t *testing.T) {
	rec, rows := toothed(t, 740, 26, []int{0, 2}, shaftRipple)
	var out bytes.Buffer
	file := skidFile(t, same)
	if err := Ripple(t.Context(), RippleOptions{SkidFile: file, Recording: rec, ProcessCSV: rows, Wheel: "60-2", Input: wheelInput, Out: &out}); err != nil {
		t.Fatal(err)
	}
	text := out.String()
	t.Log("\n" + text)
	for _, want := range []string{"52.5", "order 1 differs between load steps 0 and 2", "- code: 0", "- code: 2"} {
		if !strings.Contains(text, want) {
			t.Errorf("the report lacks %q", want)
		}
	}
	if strings.Contains(text, "NOT TO BE TRUSTED") {
		t.Error("a sound recording is doubted")
	}
	// Paste: the snippet's list takes the place of the file's own.
	pasted := skidFile(t, func(s string) string {
		a, b := strings.Index(s, "load_steps:"), strings.Index(s, "\nchannels:")
		return s[:a] + text[strings.Index(text, "load_steps:"):] + s[b:]
	})
	sk, err := skid.Load(pasted)
	if err != nil {
		t.Fatal(err)
	}
	for code, want := range shaftRipple {
		got := sk.RippleAt(code)
		worst := 0.0
		for deg := 0.0; deg < 360; deg += 5 {
			worst = math.Max(worst, math.Abs(bend(got, deg)-bend(want, deg)-bend(got, 0)+bend(want, 0)))
		}
		if len(got) < len(want) || worst > 0.03 {
			t.Errorf("step %d: %v, want %v: %.4f° apart", code, got, want, worst)
		}
	}
}

// bend is Σ (aₙ/n) sin(nθ − pₙ) in degrees: the part of the angle that one mark a turn does not see.
func bend(hs []skid.Ripple, deg float64) (sum float64) {
	for _, h := range hs {
		sum += h.Amp / float64(h.Order) * math.Sin((float64(h.Order)*deg-h.Phase)*math.Pi/180) * 180 / math.Pi
	}
	return sum
}

func TestRippleToolSaysWhatIsAmiss(t *testing.T) {
	rec, _ := toothed(t, 740, 5, []int{0}, shaftRipple)
	file := skidFile(t, same)
	var out bytes.Buffer
	if err := Ripple(t.Context(), RippleOptions{SkidFile: file, Recording: rec, Wheel: "60-2", Input: wheelInput, Out: &out}); err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"NOT TO BE TRUSTED: only ", "cannot be told from a wheel out of centre", "leave the numbers out"} {
		if !strings.Contains(out.String(), want) {
			t.Errorf("five seconds: the report lacks %q:\n%s", want, &out)
		}
	}
	for name, c := range map[string]struct {
		o    RippleOptions
		want string
	}{
		"one mark a turn":  {RippleOptions{}, "which shows no ripple"},
		"no such wheel":    {RippleOptions{Wheel: "sixty", Input: wheelInput}, "write teeth and missing teeth"},
		"impossible wheel": {RippleOptions{Wheel: "60-40", Input: wheelInput}, "missing"},
		"no such input":    {RippleOptions{Wheel: "60-2", Input: 8}, "inputs 0 to 7"},
		"another wheel":    {RippleOptions{Wheel: "36-1", Input: wheelInput}, "36-1 wheel"},
		"not a wheel":      {RippleOptions{Wheel: "60-2", Input: 3}, "60-2 wheel"},
	} {
		c.o.SkidFile, c.o.Recording, c.o.Out = file, rec, &bytes.Buffer{}
		if err := Ripple(t.Context(), c.o); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q", name, err, c.want)
		}
	}
}
