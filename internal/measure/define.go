package measure

// def defines one feature. The tables of definitions are the single truth: layout, package documentation and the table
// in DEVELOPERS.md are made of them.
type def struct {
	name   string // with the unit where there is one
	unit   string // what people read it in
	class  Class
	scale  float64 // people's value = SI value · scale + shift
	shift  float64
	what   string // one line for people
	how    string // the definition, where the line does not say it all
	source string
	valid  string // when there is a value, beside the rule of its group
	unc    string // what it is uncertain by
	eye    bool   // for the eye only: arithmetic of other features, or too restless; no baseline is learnt of it
	flat   bool   // the duty has been taken out already
}

const (
	one     = 1.0
	percent = 100.0
	bar     = 1e-5
	kilo    = 1e-3
	perHour = 3600.0
	mm2     = 1e6
	gee     = 1 / 9.80665
	zeroC   = -273.15
)

// Sources named more than once. methods.md, vibration.md, windows.md, leaks.md and handbook.md are the measured advice
// and the collected facts in the shared reference folder.
const (
	srcMethods = "methods.md 1.1"
	srcBloch   = "Bloch & Hoefner 1996"
	srcBrun    = "Brun & Kurz 2019"
	srcAPI     = "API 618 6.6 (handbook.md 1)"
	srcVib     = "vibration.md 1"
	srcLeaks   = "leaks.md"
	srcOwn     = "own definition"
)

// group is one kind of subject with its definitions.
type group struct {
	title   string
	subject string // how its subjects are named
	rule    string // when the whole group is absent
	defs    []def
}

// groups lists every definition, in the order of the layout.
func groups() []group {
	t, e, p, v, c := throwDefs(), endDefs(), pathDefs(), eventDefs(), coverDefs()
	return []group{
		{"Throw", "`t1`", "absent while an end that works has no sound pressure, unless the line says otherwise", t[:]},
		{"End", "`t1.he`, `t1.ce`", "absent without a sound, positive pressure; beyond the extremes, work and power absent on an idle end, too", e[:]},
		{"Leak path", "`t1.he.suction`, `t1.rings`", "absent without a gas; rings need both ends at work", p[:]},
		{"Valve event", "`t1.he.suction.opens`", "throws with an accelerometer; absent while it is suspect or the window is lost", v[:]},
		{"Valve", "`t1.he.s1`", "valves with a cover sensor", c[:]},
	}
}
