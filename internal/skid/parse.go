package skid

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"math"
	"os"
	"regexp"
	"time"

	"go.yaml.in/yaml/v3"
)

// Version is the file format this package reads: the value of the key `lapwing`.
const Version = 1

// standardAtmosphere is the pressure that gauge values are counted from when the file gives none, Pa.
const standardAtmosphere = 101325.0

var (
	slug    = regexp.MustCompile(`^[a-z0-9]([a-z0-9-]{0,46}[a-z0-9])?$`)
	throwID = regexp.MustCompile(`^[a-z][a-z0-9]{0,15}$`)
	inputID = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9_.-]{0,31}$`)
	tagID   = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9_./:-]{0,63}$`)
	topic   = regexp.MustCompile(`^[A-Za-z0-9_-]+(/[A-Za-z0-9_-]+)*$`)
)

// Load reads and validates a skid file. The error is the file system's, wrapped, or the joined Problems of Parse.
func Load(path string) (*Skid, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("skid: %w", err)
	}
	defer f.Close()
	raw, err := io.ReadAll(io.LimitReader(f, maxFile+1))
	if err != nil {
		return nil, fmt.Errorf("skid: read %s: %w", path, err)
	}
	return Parse(path, raw)
}

// Parse reads a skid file from memory; name stands in its messages. Every problem of the file is in the one error,
// as Problem values (see Problems), in the order of the file; with any problem the Skid is nil.
func Parse(name string, raw []byte) (*Skid, error) {
	r := &reader{file: name, at: map[string]Place{}}
	sum := sha256.Sum256(raw)
	sk := &Skid{File: name, Raw: append([]byte(nil), raw...), Hash: hex.EncodeToString(sum[:])}
	if root := r.root(raw); root != nil {
		r.skid(root, sk)
	}
	if n := r.more - len(r.problems); n > 0 {
		last := r.problems[len(r.problems)-1]
		r.problems = append(r.problems, Problem{name, last.Place, "", fmt.Sprintf("%d problems more", n), "is this a skid file?"})
	}
	if err := join(r.problems); err != nil {
		return nil, err
	}
	sk.at, sk.defaulted = r.at, r.defaulted
	return sk, nil
}

// skid reads the sections in an order in which each finds what it refers to.
func (r *reader) skid(root *yaml.Node, sk *Skid) {
	o := r.object(root, "", "lapwing", "id", "name", "site", "machine", "acquisition", "phase", "gas", "throws",
		"load_steps", "channels", "process", "detection", "limits", "tape", "uplink", "panel", "modbus")
	if o == nil {
		return
	}
	if v, ok := o.whole("lapwing", 0, 1000, true); ok && v != Version {
		o.wrong("lapwing", fmt.Sprintf("write lapwing: %d", Version), "this program reads format %d, the file says %d", Version, v)
	}
	sk.ID, _ = o.text("id", slug, "a short name of lower-case letters, digits and '-'", true)
	sk.Name, _ = o.text("name", nil, "a name for people", false)
	if sk.Name == "" {
		sk.Name = sk.ID
	}
	sk.Site, _ = o.text("site", nil, "where it stands, for people", false)
	r.machine(o, &sk.Machine)
	if a := o.sub("acquisition", false, "sampling_hz"); a != nil {
		if v := a.num("sampling_hz", bounds{500, 1e6}, true); !math.IsNaN(v) {
			sk.Rate = v
		}
	}
	r.channels(o, sk)
	r.phase(o, sk)
	r.gas(o, &sk.Gas, sk.Machine.Atmosphere)
	r.throws(o, sk)
	r.channelUse(sk)
	r.steps(o, sk)
	r.process(o, sk)
	r.detection(o, sk)
	r.limits(o, sk)
	r.tape(o, &sk.Tape)
	r.uplink(o, sk)
	r.panel(o, &sk.Panel)
	r.modbus(o, sk)
}

func (r *reader) machine(o *object, m *Machine) {
	m.Atmosphere = standardAtmosphere
	s := o.sub("machine", true, "rated_rpm", "min_rpm", "max_rpm", "rod_load_compression_kn", "rod_load_tension_kn",
		"gas_load_compression_kn", "gas_load_tension_kn",
		"atmosphere_bar_abs", "inertia_kgm2")
	if s == nil {
		return
	}
	rpm := bounds{30, 3600}
	m.RatedRPM = s.num("rated_rpm", rpm, true)
	m.MinRPM = s.numOr("min_rpm", rpm, m.RatedRPM)
	m.MaxRPM = s.numOr("max_rpm", rpm, m.RatedRPM)
	if m.MinRPM > m.RatedRPM {
		s.wrong("min_rpm", "rated_rpm must lie between min_rpm and max_rpm", "%s is above rated_rpm (%s)", short(m.MinRPM), short(m.RatedRPM))
	}
	if m.MaxRPM < m.RatedRPM {
		s.wrong("max_rpm", "rated_rpm must lie between min_rpm and max_rpm", "%s is below rated_rpm (%s)", short(m.MaxRPM), short(m.RatedRPM))
	}
	m.RodLoadCompression = 1e3 * zero(s.num("rod_load_compression_kn", bounds{0.1, 5000}, false))
	m.RodLoadTension = 1e3 * zero(s.num("rod_load_tension_kn", bounds{0.1, 5000}, false))
	m.GasLoadCompression = 1e3 * zero(s.num("gas_load_compression_kn", bounds{0.1, 5000}, false))
	m.GasLoadTension = 1e3 * zero(s.num("gas_load_tension_kn", bounds{0.1, 5000}, false))
	if v := s.numOr("atmosphere_bar_abs", bounds{0.5, 1.1}, standardAtmosphere/1e5); !math.IsNaN(v) {
		m.Atmosphere = v * 1e5
	}
	m.Inertia = zero(s.num("inertia_kgm2", bounds{0.001, 1e6}, false))
}

// zero turns an absent number into 0, where 0 means "not known".
func zero(v float64) float64 {
	if math.IsNaN(v) {
		return 0
	}
	return v
}

// pressure reads <stem>_bar_abs or <stem>_bar_gauge, exactly one of them, as Pa absolute. NaN when absent or refused.
func (o *object) pressure(stem string, b bounds, needed bool, atm float64) float64 {
	if o == nil {
		return math.NaN()
	}
	abs, gauge := stem+"_bar_abs", stem+"_bar_gauge"
	switch {
	case o.has(abs) && o.has(gauge):
		o.wrong(gauge, "keep one of "+abs+" and "+gauge, "the same pressure is given twice")
		return math.NaN()
	case o.has(gauge):
		v := o.num(gauge, bounds{b.lo - atm/1e5, b.hi - atm/1e5}, false)
		return v*1e5 + atm
	case o.has(abs):
		return o.num(abs, b, false) * 1e5
	case needed && !o.meant[abs]:
		o.r.problem(o.at, join2(o.path, abs), "write `"+abs+": …` or `"+gauge+": …`", "missing")
	}
	return math.NaN()
}

func (r *reader) phase(o *object, sk *Skid) {
	p := &sk.Phase
	p.MarksPerTurn, p.AutoLevel = 1, true
	if !o.has("phase") && !o.meant["phase"] {
		o.r.problem(o.at, "phase", "write `phase:` with `channel: …` below it; without a mark on the shaft there is no crank angle and nothing can be watched", "the phase reference is missing")
		return
	}
	s := o.sub("phase", true, "channel", "marks_per_turn", "teeth", "missing", "extra", "also_missing", "index_channel", "edge", "threshold_v", "hysteresis_v", "uncertainty_deg", "ripple")
	if s == nil {
		return
	}
	p.Channel, _ = s.text("channel", inputID, "the id of the channel with the shaft mark", true)
	if p.Channel != "" {
		r.refer(sk, join2(s.path, "channel"), s.fields["channel"], p.Channel, PhaseMark)
	}
	r.wheel(s, sk)
	p.Falling = s.choice("edge", "rising", "rising", "falling") == "falling"
	if s.has("threshold_v") {
		p.AutoLevel = false
		p.Threshold = s.num("threshold_v", bounds{-100, 100}, false)
	} else {
		r.defaulted = append(r.defaulted, "phase.threshold_v = found from the signal")
	}
	p.Hysteresis = zero(s.num("hysteresis_v", bounds{1e-4, 50}, false))
	p.Uncertainty = zero(s.num("uncertainty_deg", bounds{0.01, 10}, false))
	p.Ripple = r.ripple(s)
}

// ripple reads the harmonics of the speed within a turn, of the machine or of one load step.
func (r *reader) ripple(s *object) (out []Ripple) {
	seen := map[int]bool{}
	for i, n := range s.list("ripple", 1, 8, false, "list up to eight harmonics: - {order: 2, amplitude_percent: 0.8, phase_deg: 40}") {
		h := r.object(n, fmt.Sprintf("%s[%d]", join2(s.path, "ripple"), i), "order", "amplitude_percent", "phase_deg")
		if h == nil {
			continue
		}
		order, ok := h.whole("order", 1, 12, true)
		if ok && seen[order] {
			h.wrong("order", "give each harmonic once", "harmonic %d is given twice", order)
		}
		seen[order] = true
		out = append(out, Ripple{
			Order: order,
			Amp:   h.num("amplitude_percent", bounds{0, 10}, true) / 100,
			Phase: h.num("phase_deg", bounds{-360, 360}, true),
		})
	}
	sum := 0.0
	for _, h := range out {
		sum += h.Amp
	}
	if sum > mostRipple {
		s.wrong("ripple", "amplitudes are per cent of the mean speed; 0.5 to 2 % in all is usual", "the harmonics add up to %s %%, more than %s %%", short(sum*100), short(mostRipple*100))
	}
	return out
}

// mostRipple is what the harmonics may add up to: beyond it the angle map is no longer sure to rise.
const mostRipple = 0.2

// seconds turns a number of seconds into a duration.
func seconds(s float64) time.Duration { return time.Duration(math.Round(zero(s) * 1e9)) }
