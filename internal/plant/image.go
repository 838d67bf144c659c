package plant

import (
	"math"
	"slices"
	"strconv"
	"strings"

	"lapwing/internal/alarm"
	"lapwing/internal/wire"
)

// image is every register at one moment. It is never changed once it is in place, so a float is never torn.
type image struct {
	words []uint16
	coils map[int][]string // by address: keys of the points that wait for an acknowledgement
}

// unknown marks a code that is not known where 0 has a meaning.
const unknown = 0xFFFF

var (
	shafts   = []string{"unknown", "standstill", "starting", "running", "lost", "coasting"}
	duties   = []string{"unknown", "stopped", "starting", "changing", "steady", "unloaded", "out-of-range"}
	endings  = []string{"lost", "following", "holding", "idle", "not-delivering"}
	ne107    = []string{"function check", "good", "maintenance required", "out of specification", "failure"}
	kinds    = []string{"", "leaking", "impacting-hard", "opening-late", "fluttering", "dead-centre", "pressure-zero", "clearance", "gas", "accelerometer-gain", "sensor"}
	severity = []string{"none", "advisory", "alert", "danger"}
)

const (
	limitKind = 11
	otherKind = 99
)

func code(of []string, word string, or uint16) uint16 {
	if i := slices.Index(of, word); i >= 0 {
		return uint16(i)
	}
	return or
}

// quietNaN is what a number is that is not known: IEEE 754, 0x7FC00000.
var quietNaN = math.Float32frombits(0x7FC00000)

// draw makes the image of a snapshot. beat is the heartbeat, acks whether coils may be written.
func (m *Map) draw(n *wire.Now, points []wire.Point, flood bool, beat uint16, acks bool) *image {
	im := &image{words: make([]uint16, m.size), coils: map[int][]string{0: nil}}
	w := im.words
	h := &n.Health
	w[rHeartbeat], w[rVersion] = beat, mapVersion
	m.u32(w[rPrint:], m.print)
	w[rShaft] = code(shafts, h.State, 0)
	judging := h.Learned && h.LearnLeft == 0
	switch {
	case h.LearnLeft > 0:
		w[rMode] = 1
	case judging:
		w[rMode] = 2
	}
	bad := 0
	for i := range h.Channels {
		if h.Channels[i].State != "good" {
			bad++
		}
	}
	w[rBadChannels], w[rTroubles] = count(bad), count(len(h.Trouble))
	switch {
	case !judging:
		w[rHealth] = 3
	case bad > 0 || len(h.Trouble) > 0:
		w[rHealth] = 2
	default:
		w[rHealth] = 1
	}
	for i := range n.Standing {
		a := &n.Standing[i]
		w[rStanding]++
		if s := code(severity, a.Severity, 0); s > 0 {
			w[rAdvisory+int(s)-1]++
			w[rWorst] = max(w[rWorst], s)
		}
	}
	m.u32(w[rTurns:], uint32(h.Turns))
	m.u32(w[rBadTurns:], uint32(h.BadTurns))
	m.f32(w[rRPM:], quietNaN)
	if h.RPM != nil {
		m.f32(w[rRPM:], float32(*h.RPM))
		w[rRPMValid] = 1
	}
	m.u32(w[rLearnLeft:], uint32(max(0, h.LearnLeft)))
	if s := n.At.Unix(); s > 0 && s <= math.MaxUint32 {
		m.u32(w[rTime:], uint32(s))
	}
	if acks {
		w[rAcknowledges] = 1
	}
	if flood {
		w[rFlood] = 1
	}
	for i := range points {
		if waits(points[i].State) {
			w[rUnacked]++
			im.coils[0] = append(im.coils[0], points[i].Key)
		}
	}
	rec := n.Latest
	if h.State == "standstill" || h.State == "lost" {
		rec = nil // what was measured of the last turn is not what the machine does now
	}
	for i, g := range m.groups {
		at := groupsAt + groupSize*i
		m.alarms(w[at:], []string{g}, points, judging)
		im.coils[at] = nil
		for k := range points {
			if points[k].Subject == g && waits(points[k].State) {
				im.coils[at] = append(im.coils[at], points[k].Key)
			}
		}
		w[at+gValve] = valve(n.Findings, g)
		m.fill(w[at+gValid:], member{g, withSubject(groupNumbers, g)}, rec, n.Findings)
	}
	for i := range m.ends {
		at := endsAt + endSize*i
		w[at] = unknown
		if e := endOf(rec, m.ends[i].subject); e != nil {
			w[at] = code(endings, e.State, unknown)
		}
		var own [4]uint16
		m.alarms(own[:], []string{m.ends[i].subject}, points, judging)
		w[at+1], w[at+2] = own[gState], own[gSeverity]
		m.fill(w[at+3:], m.ends[i], rec, nil)
	}
	for i := range m.throws {
		at := throwsAt + throwSize*i
		w[at+1] = unknown
		if t := throwOf(rec, m.throws[i].subject); t != nil {
			w[at] = code(duties, t.Duty, 0)
			if t.Step >= 0 && t.Step < unknown {
				w[at+1] = uint16(t.Step)
			}
		}
		var own [4]uint16
		m.alarms(own[:], []string{m.throws[i].subject, m.throws[i].subject + ".rings"}, points, judging)
		w[at+2], w[at+3] = own[gState], own[gSeverity]
		m.fill(w[at+4:], m.throws[i], rec, nil)
	}
	for i, id := range m.channels {
		w[channelsAt+i] = unknown
		for k := range h.Channels {
			if h.Channels[k].ID == id {
				w[channelsAt+i] = code(ne107, h.Channels[k].State, unknown)
			}
		}
	}
	return im
}

func count(n int) uint16 { return uint16(min(n, unknown)) }

func withSubject(names []named, subject string) []named {
	out := slices.Clone(names)
	for i := range out {
		out[i].subject = subject
	}
	return out
}

// waits: the point asks for an acknowledgement.
func waits(state string) bool {
	var s alarm.State
	if s.UnmarshalText([]byte(state)) != nil {
		return false
	}
	return s == alarm.Unacked || s == alarm.ReturnedUnacked || s == alarm.LatchedUnacked
}

// alarms writes state, severity, kind and number of open points of some subjects. Without a point it is normal once there
// is a baseline to judge by, and not known before.
func (m *Map) alarms(w []uint16, subjects []string, points []wire.Point, judging bool) {
	best := -1
	if judging {
		w[gState] = uint16(alarm.Normal)
	}
	for i := range points {
		p := &points[i]
		if !slices.Contains(subjects, p.Subject) {
			continue
		}
		var s alarm.State
		if s.UnmarshalText([]byte(p.State)) != nil {
			continue
		}
		sev := code(severity, p.Severity, 0)
		if s.Open() {
			w[gOpen]++
		}
		// The worst by severity, then by what it asks of a person.
		rank := int(sev) * 100
		switch {
		case waits(p.State):
			rank += 50
		case s.Open():
			rank += 40
		case s > alarm.Normal: // shelved, suppressed, out of service
			rank += 30
		case s == alarm.Normal:
			rank += 10
		}
		if rank > best {
			best = rank
			w[gState], w[gSeverity], w[gKind] = uint16(s), sev, 0
			if rank >= 30 {
				w[gKind] = code(kinds, p.Kind, otherKind)
				if strings.HasSuffix(p.Kind, "-high") || strings.HasSuffix(p.Kind, "-low") {
					w[gKind] = limitKind
				}
			}
		}
	}
}

// valve is the number within its group of the valve that a finding names: the 2 of t1.he.s2.
func valve(fs []wire.Finding, group string) uint16 {
	for i := range fs {
		if fs[i].Subject == group && fs[i].Valve != "" {
			v := fs[i].Valve
			n, _ := strconv.Atoi(v[strings.LastIndexAny(v, "sd")+1:])
			return uint16(n)
		}
	}
	return 0
}

// fill writes a validity register and the numbers behind it.
func (m *Map) fill(w []uint16, of member, rec *wire.Turn, findings []wire.Finding) {
	for i, n := range of.names {
		v := quietNaN
		x, ok := numberOf(rec, n.subject, n.name)
		if name, found := strings.CutPrefix(n.name, foundPrefix); found {
			x, ok = foundOf(findings, n.subject, name)
		}
		if ok && !math.IsNaN(x) && math.Abs(x) <= math.MaxFloat32 {
			v = float32(x)
			w[0] |= 1 << i
		}
		m.f32(w[1+2*i:], v)
	}
}

func (m *Map) u32(w []uint16, v uint32) {
	w[0], w[1] = uint16(v>>16), uint16(v)
	if m.lowFirst {
		w[0], w[1] = w[1], w[0]
	}
}

func (m *Map) f32(w []uint16, v float32) { m.u32(w, math.Float32bits(v)) }

func throwOf(rec *wire.Turn, id string) *wire.TurnThrow {
	if rec == nil || !rec.Valid {
		return nil
	}
	for i := range rec.Throws {
		if rec.Throws[i].ID == id {
			return &rec.Throws[i]
		}
	}
	return nil
}

func endOf(rec *wire.Turn, subject string) *wire.TurnEnd {
	id, end, _ := strings.Cut(subject, ".")
	t := throwOf(rec, id)
	if t == nil {
		return nil
	}
	for i := range t.Ends {
		if t.Ends[i].End == end {
			return &t.Ends[i]
		}
	}
	return nil
}

// foundOf is an amount of the leak that is found at a subject.
func foundOf(fs []wire.Finding, subject, name string) (float64, bool) {
	for i := range fs {
		if fs[i].Subject != subject || fs[i].Kind != "leaking" {
			continue
		}
		for _, a := range fs[i].Amounts {
			if a.Name == name {
				return a.Value, true
			}
		}
	}
	return 0, false
}

// numberOf finds a measure in a turn record: of the throw, of an end, or of a leak path.
func numberOf(rec *wire.Turn, subject, name string) (float64, bool) {
	id, rest, below := strings.Cut(subject, ".")
	t := throwOf(rec, id)
	if t == nil {
		return 0, false
	}
	var from map[string]float64
	switch {
	case !below:
		from = t.Values
	case rest == "he" || rest == "ce":
		if e := endOf(rec, subject); e != nil {
			from = e.Values
		}
	default:
		from = t.Paths[subject]
	}
	v, ok := from[name]
	return v, ok
}
