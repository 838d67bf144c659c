package wire

import "time"

// Learning says what is being learnt, what waits for a person's word, and what is in force: GET /api/v1/learning.
type Learning struct {
	Version  int        `json:"v"`
	Skid     string     `json:"skid"`
	State    string     `json:"state"`             // none, running, proposed
	Kind     string     `json:"kind,omitempty"`    // learnt, added, renewed
	Subject  string     `json:"subject,omitempty"` // of a renewal
	By       string     `json:"by,omitempty"`
	Note     string     `json:"note,omitempty"`
	Turns    int        `json:"steady_turns"`        // of this run so far
	Want     int        `json:"steady_turns_wanted"` // at which it ends
	Coverage []Covered  `json:"coverage"`
	Withheld int        `json:"measures_withheld"` // not judged until the run is accepted or thrown away
	Proposed *Baseline  `json:"proposed,omitempty"`
	InForce  *Baseline  `json:"in_force,omitempty"`
	Drifting []Drifting `json:"drifting"` // measures whose slow test says that they have left the baseline for good
	Said     string     `json:"said"`     // one sentence for people: where it stands and what to do next
}

// Drifting is a measure that has moved slowly and lastingly since its baseline was learnt. It is no finding: those need
// two kinds of evidence.
type Drifting struct {
	Subject string  `json:"subject"`
	Measure string  `json:"measure"`
	Way     string  `json:"way"`   // up, down
	Limits  float64 `json:"limit"` // of the slow test, by how many times its limit is reached, at most 2
}

// Covered is how far one throw's load step has been learnt.
type Covered struct {
	Throw    string      `json:"throw"`
	LoadStep int         `json:"load_step"`
	Inferred bool        `json:"inferred"` // read off the traces, as without process values
	Turns    int         `json:"steady_turns"`
	Want     int         `json:"steady_turns_wanted"`
	Ratio    *[2]float64 `json:"ratio,omitempty"` // lowest and highest
	RPM      *[2]float64 `json:"speed_rpm,omitempty"`
	Ps       *[2]float64 `json:"p_suction_bar_abs,omitempty"`
	Usable   bool        `json:"usable"`
	Missing  string      `json:"missing,omitempty"` // in plain words
}

// Baseline describes a stored or proposed one: GET /api/v1/baselines.
type Baseline struct {
	ID        uint64    `json:"id"` // 0: proposed, not stored yet
	InForce   bool      `json:"in_force"`
	Created   time.Time `json:"created,omitzero"`
	Kind      string    `json:"kind,omitempty"`
	Subject   string    `json:"subject,omitempty"`
	By        string    `json:"by,omitempty"`
	Note      string    `json:"note,omitempty"`
	FirstTurn int64     `json:"first_turn"`
	LastTurn  int64     `json:"last_turn"`
	Cells     int       `json:"load_steps_and_throws"`
	Measures  int       `json:"measures"`
	Skid      string    `json:"skid_hash"`
	Doubts    []string  `json:"doubts"`
	Unusable  string    `json:"unusable,omitempty"` // why it cannot judge this machine
}
