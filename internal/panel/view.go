package panel

import (
	"encoding/json"
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
	"time"

	"lapwing/internal/wire"
)

// view is a snapshot arranged for the page: what needs attention comes first.
type view struct {
	*wire.Now
	Banner banner
	Cards  []card
	Seen   []wire.Finding // findings behind no standing alarm
	Valves []throwMap
	Others []wire.Channel // channels of no throw
}

// banner is the one line that is read from across the room.
type banner struct {
	Class string // danger, alert, advisory, mute, good
	Title string // for the browser's tab
	Text  string
	More  string
}

// stale is the age beyond which a snapshot no longer shows the present: a turn takes a fraction of a second.
const stale = 10 * time.Second

// card is one standing alarm with everything that belongs to it.
type card struct {
	wire.Alarm
	Finding *wire.Finding
	Where   string // the subject in words
	State   string
	For     string // how long it has stood; empty: not known

	Cylinder string // the throw to look at, if any
	Acts     []act
}

// throwMap is one throw drawn as a table: ends down, valve groups across.
type throwMap struct {
	ID, Duty string
	Step     int
	Whole    cell // what concerns the throw as a whole
	Rows     []mapRow
	Sensors  []wire.Channel
}

type mapRow struct {
	End   string
	State string
	Cells [2]cell // suction, discharge
	short string  // he, ce
}

// cell is one valve group: its worst standing alarm, or why there is nothing to say.
type cell struct {
	Class string
	Words string
	Opens string // where it opens and the window that follows it

	Covers string // cover temperatures of its valves
}

// arrange prepares a snapshot that has been the newest one for age.
func arrange(n *wire.Now, age time.Duration) view {
	v := view{Now: n, Banner: headline(n, age)}
	alarmed := map[string]bool{}
	for i := range n.Standing {
		a := &n.Standing[i]
		alarmed[a.Key] = true
		v.Cards = append(v.Cards, card{Alarm: *a, Finding: findingOf(n, a), Where: inWords(a.Subject), State: stateInWords(a.To), For: lasted(a.At, n.At),
			Cylinder: throwOf(n, a.Subject), Acts: actsFor(a.To)})
		if c := &v.Cards[i]; c.Finding != nil && slices.ContainsFunc(n.Findings, func(f wire.Finding) bool { return c.Finding.Sentence == f.Sentence }) {
			c.Sentence = c.Finding.Sentence // the amounts below it are of now, and so are its words
		}
	}
	for i := range n.Findings {
		if f := &n.Findings[i]; !alarmed[f.Subject+"/"+f.Kind] {
			v.Seen = append(v.Seen, *f)
		}
	}
	if n.Latest != nil && n.Latest.Valid {
		for i := range n.Latest.Throws {
			v.Valves = append(v.Valves, drawThrow(n, &n.Latest.Throws[i]))
		}
	}
	mine := func(c *wire.Channel, throw string) bool {
		return c.Place == throw || strings.HasPrefix(c.Place, throw+".")
	}
	for i := range n.Health.Channels {
		c, of := n.Health.Channels[i], -1
		for k := range v.Valves {
			if mine(&c, v.Valves[k].ID) {
				of = k
			}
		}
		if of < 0 {
			v.Others = append(v.Others, c)
			continue
		}
		v.Valves[of].Sensors = append(v.Valves[of].Sensors, c)
	}
	return v
}

var ranks = map[string]int{"danger": 3, "alert": 2, "advisory": 1}

// headline never lets silence look like health: no alarm means something only while valves are being judged.
func headline(n *wire.Now, age time.Duration) banner {
	old := ""
	if age > stale {
		old = fmt.Sprintf("nothing new has come for %s", lasted(n.At, n.At.Add(age)))
		if n.At.IsZero() {
			old = "nothing has come yet"
		}
	}
	var count [4]int
	var first *wire.Alarm
	for i := range n.Standing {
		a := &n.Standing[i]
		count[ranks[a.Severity]]++
		if first == nil || ranks[a.Severity] > ranks[first.Severity] {
			first = a
		}
	}
	var said []string
	for _, w := range []struct {
		rank      int
		one, more string
	}{{3, "danger", "dangers"}, {2, "alert", "alerts"}, {1, "advisory", "advisories"}} {
		switch c := count[w.rank]; {
		case c == 1:
			said = append(said, "1 "+w.one)
		case c > 1:
			said = append(said, fmt.Sprintf("%d %s", c, w.more))
		}
	}
	if count[0] > 0 {
		said = append(said, fmt.Sprintf("%d waiting for an acknowledgement", count[0]))
	}
	if first != nil {
		counts := strings.Join(said, ", ")
		b := banner{tone(first.Severity), counts, inWords(first.Subject) + ": " + first.Kind, counts}
		if b.Class != "mute" {
			b.Text = strings.ToUpper(first.Severity[:1]) + first.Severity[1:] + ": " + b.Text
		}
		if old != "" {
			b.More += "; " + old
		}
		return b
	}
	none := "No alarm stands"
	switch h := &n.Health; {
	case old != "":
		return banner{Class: "mute", Title: "nothing new", Text: none + ", but " + old}
	case h.State != "running" && h.State != "coasting": // a shaft that coasts still gives turns
		return banner{Class: "mute", Title: h.State, Text: none + ", but no valve is being watched: " + word(h.State)}
	case !h.Learned:
		return banner{Class: "mute", Title: "not judging", Text: none + ", but no valve is being judged: " + word(h.Line)}
	case n.Latest == nil:
		return banner{Class: "mute", Title: "no turn yet", Text: none + ", but no turn has been measured yet"}
	case !n.Latest.Valid:
		return banner{Class: "mute", Title: "turn not judged", Text: none + "; the last turn was not judged: " + n.Latest.Reason}
	case len(h.Trouble) > 0:
		return banner{Class: "mute", Title: "monitor in trouble", Text: none + ", but this monitor needs attention itself"}
	}
	not, any := notFollowed(n.Latest)
	more := ""
	if len(not) > 0 {
		more = "Not judged now: " + strings.Join(not, ", ")
	}
	if !any {
		return banner{Class: "mute", Title: "not judging", Text: none + ", but no valve can be judged on this turn", More: more}
	}
	return banner{Class: "good", Title: "no alarm", Text: none + ". Watching.", More: more}
}

// notFollowed lists the ends whose valves are not followed; any says whether some are.
func notFollowed(t *wire.Turn) (not []string, any bool) {
	for i := range t.Throws {
		for k := range t.Throws[i].Ends {
			if e := &t.Throws[i].Ends[k]; e.State == "following" {
				any = true
			} else {
				not = append(not, t.Throws[i].ID+"."+e.End+" ("+e.State+")")
			}
		}
	}
	return not, any
}

func word(s string) string {
	if s == "" {
		return "not known why"
	}
	return s
}

// findingOf gives the evidence behind an alarm: the present finding when there is one, else what the alarm carried.
func findingOf(n *wire.Now, a *wire.Alarm) *wire.Finding {
	for i := range n.Findings {
		if n.Findings[i].Subject+"/"+n.Findings[i].Kind == a.Key {
			return &n.Findings[i]
		}
	}
	switch d := a.Detail.(type) {
	case wire.Finding:
		return &d
	case nil:
		return nil
	default:
		raw, err := json.Marshal(d)
		var f wire.Finding
		if err != nil || json.Unmarshal(raw, &f) != nil || f.Subject == "" {
			return nil // a limit: its sentence has the numbers
		}
		return &f
	}
}

var partWords = map[string]string{"he": "head end", "ce": "crank end", "suction": "suction valves", "discharge": "discharge valves", "rings": "piston rings", "packing": "rod packing"}

// inWords spells a subject out: t1.he.s2 is throw t1, head end, suction valve 2.
func inWords(subject string) string {
	parts := strings.Split(subject, ".")
	if len(parts) == 1 {
		return subject
	}
	out := []string{"throw " + parts[0]}
	for _, p := range parts[1:] {
		switch w, known := partWords[p]; {
		case known:
			out = append(out, w)
		case len(p) > 1 && p[0] == 's' && digits(p[1:]):
			out = append(out, "suction valve "+p[1:])
		case len(p) > 1 && p[0] == 'd' && digits(p[1:]):
			out = append(out, "discharge valve "+p[1:])
		default:
			return subject
		}
	}
	return strings.Join(out, ", ")
}

func digits(s string) bool {
	return strings.Trim(s, "0123456789") == ""
}

func stateInWords(s string) string {
	switch s {
	case "unacknowledged":
		return "not acknowledged"
	case "returned-unacknowledged":
		return "condition gone, not acknowledged"
	case "latched-unacknowledged":
		return "condition gone, latched, not acknowledged"
	case "latched-acknowledged":
		return "condition gone, latched, waits for a reset"
	}
	return s
}

// lasted tells a span in the largest unit that fits; empty when either end is not known.
func lasted(from, to time.Time) string {
	d := to.Sub(from)
	switch {
	case from.IsZero() || to.IsZero() || d < 0:
		return ""
	case d < time.Minute:
		return fmt.Sprintf("%d s", int(d.Seconds()))
	case d < time.Hour:
		return fmt.Sprintf("%d min", int(d.Minutes()))
	case d < 48*time.Hour:
		return fmt.Sprintf("%d h %d min", int(d.Hours()), int(d.Minutes())%60)
	}
	return fmt.Sprintf("%d days", int(d.Hours()/24))
}

func drawThrow(n *wire.Now, t *wire.TurnThrow) throwMap {
	m := throwMap{ID: t.ID, Duty: t.Duty, Step: t.Step}
	m.Whole = worst(n, func(s string) bool { return s == t.ID || s == t.ID+".rings" || s == t.ID+".packing" })
	names := map[string]string{"he": "head end", "ce": "crank end"}
	for i := range t.Ends {
		e := &t.Ends[i]
		row := mapRow{End: names[e.End], State: e.State, short: e.End}
		for g, group := range []string{"suction", "discharge"} {
			base := t.ID + "." + e.End + "."
			mine := func(s string) bool { return inGroup(s, base, group) }
			c := worst(n, mine)
			if c.Class == "" {
				c = seen(n, mine)
			}
			if c.Class == "" {
				c.Class, c.Words = quiet(n, e.State)
			}
			for k := range e.Events {
				if ev := &e.Events[k]; ev.Event == group+".opens" && ev.Angle != nil && ev.Window != nil {
					c.Opens = fmt.Sprintf("opens at %.1f°, window %.1f° to %.1f°", *ev.Angle, ev.Window[0], ev.Window[1])
				}
			}
			c.Covers = strings.Join(covers(t, base+group[:1]), "; ")
			row.Cells[g] = c
		}
		m.Rows = append(m.Rows, row)
	}
	return m
}

// worst gives the worst standing alarm on the subjects that match.
func worst(n *wire.Now, match func(subject string) bool) (c cell) {
	rank := -1
	for i := range n.Standing {
		if a := &n.Standing[i]; match(a.Subject) && ranks[a.Severity] > rank {
			rank = ranks[a.Severity]
			c = cell{Class: a.Severity, Words: a.Severity + ": " + a.Kind}
			if rank == 0 {
				c = cell{Class: "mute", Words: a.Kind + ": " + stateInWords(a.To)}
			}
		}
	}
	return c
}

// quiet says what it means that no alarm stands on a valve group.
func quiet(n *wire.Now, end string) (class, words string) {
	switch {
	case end == "idle":
		return "mute", "idle: does no work, not judged"
	case end != "following":
		return "mute", end + ": not judged now"
	case !n.Health.Learned:
		return "mute", "measured, not judged"
	}
	return "good", "no alarm"
}

// covers tells the cover temperatures of one valve group, valve by valve.
func covers(t *wire.TurnThrow, prefix string) (out []string) {
	for _, id := range slices.Sorted(maps.Keys(t.Paths)) {
		c, ok := t.Paths[id]["cover_c"]
		if !ok || !strings.HasPrefix(id, prefix) || !digits(id[len(prefix):]) {
			continue
		}
		s := fmt.Sprintf("%s cover %.0f °C", id[strings.LastIndex(id, ".")+1:], c)
		if d, ok := t.Paths[id]["cover_above_group_k"]; ok {
			s += strings.Replace(fmt.Sprintf(", %+.0f K", math.Round(d)+0), "-", "−", 1) // + 0: no minus zero
		}
		out = append(out, s)
	}
	return out
}

// throwOf is the throw of the newest turn that a subject belongs to; empty when it is none's.
func throwOf(n *wire.Now, subject string) string {
	if n.Latest != nil {
		for i := range n.Latest.Throws {
			if id := n.Latest.Throws[i].ID; wire.Within(subject, id) {
				return id
			}
		}
	}
	return ""
}

// Owner is throwOf for the pages.
func (v *view) Owner(subject string) string { return throwOf(v.Now, subject) }

// inGroup tells whether a subject is a valve group, one of its events or one of its valves; base is t1.he. .
func inGroup(s, base, group string) bool {
	return s == base+group || strings.HasPrefix(s, base+group+".") || strings.HasPrefix(s, base+group[:1]) && digits(s[len(base)+1:])
}

// seen gives the worst finding that no standing alarm shows: it is too little for one, or its point is hidden.
func seen(n *wire.Now, match func(subject string) bool) (c cell) {
	for i := range n.Findings {
		if f := &n.Findings[i]; match(f.Subject) && (c.Class == "" || ranks[f.Grade] > ranks[c.Class]) {
			c = cell{Class: tone(f.Grade), Words: f.Grade + ": " + f.Kind + ", no alarm stands on it"}
		}
	}
	return c
}

// hidden says which alarm points cannot show: what is shelved must not look like health.
func (v *view) hidden(points []wire.Point) {
	var words []string
	behind := false
	for i := range points {
		p := &points[i]
		if p.State != "shelved" && p.State != "suppressed" && p.State != "out-of-service" {
			continue
		}
		stands := ranks[p.Level] > 0
		if p.State == "suppressed" && !stands {
			continue // by design, and nothing is lost by it
		}
		behind = behind || stands
		said := p.Key + " is " + strings.ReplaceAll(p.State, "-", " ")
		if stands {
			said += ", behind it: " + p.Level
		}
		words = append(words, said)
		for k := range v.Valves {
			for r := range v.Valves[k].Rows {
				row := &v.Valves[k].Rows[r]
				for g, group := range []string{"suction", "discharge"} {
					if c := &row.Cells[g]; c.Class == "good" && inGroup(p.Subject, v.Valves[k].ID+"."+row.short+".", group) {
						c.Class, c.Words = "mute", p.Kind+": "+strings.ReplaceAll(p.State, "-", " ")
					}
				}
			}
		}
	}
	if len(words) == 0 {
		return
	}
	if v.Banner.More != "" {
		v.Banner.More += "; "
	}
	v.Banner.More += strings.Join(words, "; ")
	if behind && v.Banner.Class == "good" {
		v.Banner.Class, v.Banner.Title, v.Banner.Text = "mute", "an alarm is hidden", "No alarm is shown, but one is hidden"
	}
}
