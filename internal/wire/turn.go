package wire

import (
	"lapwing/internal/duty"
	"lapwing/internal/measure"
	"lapwing/internal/skid"
	"lapwing/internal/turn"
	"lapwing/internal/window"
)

// Turn is the record of one revolution: one line of a review file.
// The angles of one event share one scale, so that its window always reads low to high: near a dead centre they may
// lie a little under 0 or over 360 degrees.
type Turn struct {
	Type    string      `json:"type"` // "turn"
	Turn    int64       `json:"turn"`
	TimeS   float64     `json:"t_s"` // head-end dead centre of the first throw, from the start of the recording
	Valid   bool        `json:"valid"`
	Reason  string      `json:"reason,omitempty"`
	RPM     *float64    `json:"speed_rpm,omitempty"`
	Samples [2]int64    `json:"samples"` // raw sample range, half open
	Throws  []TurnThrow `json:"throws,omitempty"`
}

// TurnThrow is one throw's part of a turn.
type TurnThrow struct {
	ID     string                        `json:"throw"`
	TimeS  *float64                      `json:"t_s,omitempty"` // its own head-end dead centre
	RPM    *float64                      `json:"speed_rpm,omitempty"`
	AngleU *float64                      `json:"angle_uncertainty_deg,omitempty"` // 95 % half-width
	Duty   string                        `json:"duty"`
	Step   int                           `json:"load_step"`
	Values map[string]float64            `json:"values,omitempty"`
	Ends   []TurnEnd                     `json:"ends"`
	Paths  map[string]map[string]float64 `json:"paths,omitempty"` // leak paths and valves: subject → values
}

// TurnEnd is one cylinder end's part of a turn.
type TurnEnd struct {
	End    string             `json:"end"` // he, ce
	State  string             `json:"state"`
	Values map[string]float64 `json:"values"`
	Absent map[string]string  `json:"absent,omitempty"` // measure → why it cannot be known
	Events []TurnEvent        `json:"events"`
}

// TurnEvent is one valve event with its window.
type TurnEvent struct {
	Event    string             `json:"event"`
	State    string             `json:"state"`
	Angle    *float64           `json:"angle_deg,omitempty"`    // where the pressure leaves the closed line
	Crossing *float64           `json:"crossing_deg,omitempty"` // closed line extended to the plateau
	Expected *float64           `json:"expected_deg,omitempty"` // if every valve sealed, from this turn's plateaus
	Window   *[2]float64        `json:"window_deg,omitempty"`
	Conf     *float64           `json:"confidence,omitempty"` // 0..1
	Shared   bool               `json:"shared,omitempty"`
	Ring     string             `json:"ring,omitempty"`  // what rings in it: separated, one-sided, shared, cross-talk; absent when it is alone
	Knock    bool               `json:"knock,omitempty"` // the pin load changes its sign here: the crosshead may knock
	Why      string             `json:"why,omitempty"`
	Values   map[string]float64 `json:"values,omitempty"` // peak, RMS and what else was heard in the window
}

// EndNames are the ends' short names, indexed by crank.HE and crank.CE.
var EndNames = [2]string{"he", "ce"}

// EventNames name the events in subjects and records, indexed by window.Event.
var EventNames = [window.Events]string{"discharge.closes", "suction.opens", "suction.closes", "discharge.opens"}

// Recorder makes turn records for one skid; it holds where each feature goes.
type Recorder struct {
	sk     *skid.Skid
	layout measure.Layout
	rate   float64
	spots  []spot
}

// spot is where a feature stands in a record: an end and an event of it; -1 where to none.
type spot struct{ end, event int }

// NewRecorder prepares records of vectors in the given layout; rate in samples per second, above 0.
func NewRecorder(sk *skid.Skid, layout measure.Layout, rate float64) *Recorder {
	r := &Recorder{sk: sk, layout: layout, rate: rate, spots: make([]spot, len(layout))}
	for i := range layout {
		r.spots[i] = place(sk.Throws[layout[i].Throw].ID, layout[i].Subject)
	}
	return r
}

// Record makes the record of one turn. A turn that is not valid has a reason and no throws.
func (r *Recorder) Record(t *turn.Turn, w window.Result, v *measure.Vector, points []duty.Point) Turn {
	rec := r.Head(t)
	if !t.Valid() {
		return rec
	}
	for i := range t.Throws {
		rec.Throws = append(rec.Throws, r.throw(i, &t.Throws[i], &w.Throws[i], v, points[i]))
	}
	return rec
}

// Head is a record without its throws, which are nearly all of the work.
func (r *Recorder) Head(t *turn.Turn) Turn {
	rec := Turn{Type: "turn", Turn: t.Number, TimeS: round(t.Time, 7), Valid: t.Valid(), Reason: t.Reason, RPM: opt(round(t.RPM, 4)), Samples: [2]int64{t.Seq0, t.Seq1}}
	if opt(t.Time) == nil { // every turn is somewhere: say at least where its samples begin
		rec.TimeS = round(float64(t.Seq0)/r.rate, 7)
	}
	return rec
}

func (r *Recorder) throw(i int, t *turn.Throw, w *window.Throw, v *measure.Vector, p duty.Point) TurnThrow {
	sk := &r.sk.Throws[i]
	out := TurnThrow{ID: sk.ID, TimeS: opt(round(t.T0/r.rate, 7)), RPM: opt(round(t.RPM, 4)), AngleU: angle(t.U), Duty: p.State.String(), Step: p.Step,
		Values: map[string]float64{}, Paths: map[string]map[string]float64{}, Ends: []TurnEnd{}}
	events := [2][window.Events]map[string]float64{}
	values := [2]map[string]float64{{}, {}}
	absent := [2]map[string]string{{}, {}}
	for k := range r.layout {
		f := &r.layout[k]
		if f.Throw != i {
			continue
		}
		x := opt(figures(v.V[k]*f.Scale+f.Shift, 9)) // nine figures: more than any sensor, and a record stays readable
		switch at := r.spots[k]; {
		case at.end < 0 && f.Subject == sk.ID:
			put(out.Values, f.Name, x)
		case at.end < 0:
			if x != nil {
				if out.Paths[f.Subject] == nil {
					out.Paths[f.Subject] = map[string]float64{}
				}
				put(out.Paths[f.Subject], f.Name, x)
			}
		case at.event < 0:
			put(values[at.end], f.Name, x)
			if x == nil {
				absent[at.end][f.Name] = v.Why[k]
			}
		default:
			if events[at.end][at.event] == nil {
				events[at.end][at.event] = map[string]float64{}
			}
			put(events[at.end][at.event], f.Name, x)
		}
	}
	for e := range w.Ends {
		end := &w.Ends[e]
		if end.NotPresent {
			continue
		}
		te := TurnEnd{End: EndNames[e], State: end.State.String(), Values: values[e], Absent: absent[e]}
		for ev := range end.W {
			rec := event(ev, &end.W[ev], events[e][ev])
			if i < len(v.Marks) {
				m := v.Marks[i][e][ev]
				if rec.Knock = m.Knock; m.Sharing != measure.Alone {
					rec.Ring = m.Sharing.String()
				}
			}
			te.Events = append(te.Events, rec)
		}
		out.Ends = append(out.Ends, te)
	}
	return out
}

func event(ev int, w *window.Window, values map[string]float64) TurnEvent {
	rec := TurnEvent{Event: EventNames[ev], State: w.State.String(), Angle: angle(w.Angle), Crossing: angle(w.Thermo), Expected: angle(w.Expected),
		Conf: opt(round(w.Conf, 3)), Shared: w.Shared, Why: w.Why, Values: values}
	if lo, hi := angle(w.Lo), angle(w.Hi); lo != nil && hi != nil && *lo <= *hi {
		rec.Window = &[2]float64{*lo, *hi}
	}
	return rec
}

// place finds the end and event that a subject of a throw names.
func place(throw, subject string) spot {
	for e, n := range EndNames {
		base := throw + "." + n
		if subject == base {
			return spot{e, -1}
		}
		for ev, en := range EventNames {
			if subject == base+"."+en {
				return spot{e, ev}
			}
		}
	}
	return spot{-1, -1}
}

func put(m map[string]float64, name string, x *float64) {
	if x != nil {
		m[name] = *x
	}
}
