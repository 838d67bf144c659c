package station

import (
	"bytes"
	"encoding/csv"
	"errors"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"lapwing/internal/acq"
	acqmodel "lapwing/internal/acq/model"
	"lapwing/internal/acq/wav"
	"lapwing/internal/model"
	"lapwing/internal/plant"
	"lapwing/internal/skid"
)

// walkedRecording writes a recording of the example machine over two ratios at two speeds, with its process values.
func walkedRecording(t *testing.T, sk *skid.Skid) (wavFile, csvFile string) {
	t.Helper()
	dir := t.TempDir()
	wavFile, csvFile = filepath.Join(dir, "rec.wav"), filepath.Join(dir, "process.csv")
	const each = 4.0 // s
	s := model.Script{RPM: 960}.Add(each, 0, model.DischargePressure, "1", 15e5).Add(2*each, .5, model.Speed, "", 780).
		Add(3*each, 0, model.DischargePressure, "1", 24e5)
	src, err := acqmodel.Open(sk, s, acqmodel.Options{Seed: 3, Duration: 4 * time.Duration(each) * time.Second})
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	info := src.Info()
	w, err := wav.Create(wavFile, wav.WriterOptions{Rate: info.Rate, Channels: info.Channels, Bits: info.Bits})
	if err != nil {
		t.Fatal(err)
	}
	rows := [][]string{plant.Columns(sk)}
	var b acq.Block
	for {
		err := src.Read(t.Context(), &b)
		if errors.Is(err, io.EOF) {
			break
		}
		if err == nil {
			err = w.Write(&b)
		}
		if err != nil {
			t.Fatal(err)
		}
		if second := float64(len(rows) - 1); float64(b.Seq0)/info.Rate >= second {
			rows = append(rows, cells(rows[0], second, src.Process(second)))
		}
	}
	var text bytes.Buffer
	if err := errors.Join(w.Close(), csv.NewWriter(&text).WriteAll(rows), os.WriteFile(csvFile, text.Bytes(), 0o644)); err != nil {
		t.Fatal(err)
	}
	return wavFile, csvFile
}

// From a recording to what a person reads: the machine's own dead centre, clearance and passage come out of the report
// although the skid file is wrong about them.
func TestDatumReport(t *testing.T) {
	t.Parallel()
	quick := func(s string) string {
		for _, c := range [][2]string{{"sampling_hz: 51200", "sampling_hz: 20480"}, {"impact_band_hz: [2000, 20000]", "impact_band_hz: [2000, 8000]"},
			{"leak_band_hz: [10000, 20000]", "leak_band_hz: [5000, 8000]"}} {
			if !strings.Contains(s, c[0]) {
				t.Fatalf("the example has no %q", c[0])
			}
			s = strings.Replace(s, c[0], c[1], 1)
		}
		// The model's gas has one exponent at all ratios: so must the gas that is told.
		a, b := strings.Index(s, "  mole_percent:"), strings.Index(s, "\nthrows:")
		return s[:a] + "  fixed: {molar_mass_kg_per_kmol: 16.6, z_suction: 0.98, z_discharge: 0.98, volume_exponent: 1.29, temperature_exponent: 1.27}\n" + s[b:]
	}
	machine, err := skid.Load(skidFile(t, quick))
	if err != nil {
		t.Fatal(err)
	}
	pressure := machine.Throws[0].Ends[0].Pressure
	for i := range machine.Channels {
		if machine.Channels[i].ID == pressure {
			machine.Channels[i].Passage, machine.Channels[i].PassageQ = 700, 9
		}
	}
	rec, rows := walkedRecording(t, machine)
	told := skidFile(t, func(s string) string {
		return strings.Replace(quick(s), "dead_centre_deg: 37 ", "dead_centre_deg: 37.9 ", 1)
	})
	before, err := os.ReadFile(told)
	if err != nil {
		t.Fatal(err)
	}
	var out bytes.Buffer
	if err := Datum(t.Context(), DatumOptions{SkidFile: told, Recording: rec, ProcessCSV: rows, Out: &out}); err != nil {
		t.Fatalf("%v\n%s", err, out.String())
	}
	text := out.String()
	t.Log("\n" + text)
	after, err := os.ReadFile(told)
	if err != nil || !bytes.Equal(before, after) {
		t.Errorf("the skid file was touched: %v", err)
	}
	number := func(pattern string, nth int) float64 {
		m := regexp.MustCompile(pattern).FindAllStringSubmatch(text, -1)
		if len(m) <= nth {
			t.Errorf("the report has no %q (%d)", pattern, nth)
			return math.NaN()
		}
		v, err := strconv.ParseFloat(m[nth][1], 64)
		if err != nil {
			t.Error(err)
		}
		return v
	}
	within(t, "dead centre of t1", number(`dead centre +([\d.]+)°`, 0), 37, .15)
	within(t, "dead centre of t2", number(`dead centre +([\d.]+)°`, 1), 217, .15)
	within(t, "head-end clearance of t1, %", number(`clearance t1.he +([\d.]+) %`, 0), 100*machine.Throws[0].Cylinder.Clearance[0], .2)
	within(t, "passage of t1.he, Hz", number(`passage `+regexp.QuoteMeta(pressure)+` +([\d.]+) Hz`, 0), 700, 15)
	for _, want := range []string{"the file says 37.90°: OFF", "the file says 217.00°: agrees", "not found", "locked out", "not changed"} {
		if !strings.Contains(text, want) {
			t.Errorf("the report lacks %q", want)
		}
	}
}

func TestDatumRefuses(t *testing.T) {
	rec, rows := toothed(t, 740, 3, []int{0}, nil) // no cylinder in it
	var out bytes.Buffer
	err := Datum(t.Context(), DatumOptions{SkidFile: skidFile(t, same), Recording: rec, ProcessCSV: rows, Out: &out})
	if err == nil || !strings.Contains(err.Error(), "no throw could be estimated") || !strings.Contains(out.String(), "Nothing could be estimated") {
		t.Errorf("%v\n%s", err, out.String())
	}
}
