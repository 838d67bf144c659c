package verdict

import "lapwing/internal/measure"

// Grade says how far a finding goes. One class of evidence gives at most Advisory.
type Grade uint8

// Grades, in rising order.
const (
	None Grade = iota
	Advisory
	Alert
	Danger
)

// Evidence is one reason for (or against) a finding, in plain words with its number.
type Evidence struct {
	Class    measure.Class
	Text     string  // "discharge opens 4.1° later than expected at this duty"
	Feature  int     // index in the layout, -1 when it is a combination
	Value    float64 // SI
	Expected float64
	Z        float64 // robust spreads
	LLR      float64 // log-likelihood ratio, natural log, after discount
}

// Quantity is a severity in physical units.
type Quantity struct {
	Name   string // leak_area_mm2, lost_capacity_percent …, unit in the name
	Value  float64
	Lo, Hi float64 // interval; NaN when not known
}

// Finding is what the evidence says about one subject.
type Finding struct {
	Subject    string // valve group t1.he.suction, or t1.rings, t1.packing, or a channel id
	Kind       string // leaking, impacting-hard, opening-late, sensor …
	Valve      string // the single valve when cover temperatures name it, else ""
	Grade      Grade
	Odds       float64 // total log-likelihood ratio after caps
	SinceTurn  int64   // turn of the first block that pointed here
	Turn       int64   // last turn judged
	Seq0, Seq1 int64   // raw samples of the last block
	Throw      int
	Severity   []Quantity
	Trend      Trend
	Evidence   []Evidence // strongest first
	Sentence   string     // one sentence for the operator
	Settle     []string   // what would confirm or refute it
	Next       []string   // what people usually do next, with cautions
	Ambiguous  []string   // other subjects the evidence cannot tell from this one
}
