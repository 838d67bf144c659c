package wire

import (
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/measure"
	"lapwing/internal/verdict"
)

// FindingLine is the record of one finding: one line of a review file.
type FindingLine struct {
	Type  string  `json:"type"` // "finding"
	TimeS float64 `json:"t_s"`  // of the turn judged last, from the start of the recording
	Finding
}

// FindingRecord makes the record of a finding; t in seconds from the start of the recording.
func FindingRecord(t float64, f *verdict.Finding, layout measure.Layout) FindingLine {
	return FindingLine{Type: "finding", TimeS: round(t, 7), Finding: FromFinding(f, layout)}
}

// TransitionLine is the record of one alarm transition: one line of a review file.
type TransitionLine struct {
	Type     string    `json:"type"` // "transition"
	TimeS    float64   `json:"t_s"`  // of the turn in which it happened, from the start of the recording
	ID       uint64    `json:"id"`
	At       time.Time `json:"at,omitzero"` // UTC; absent when the recording's start is not known
	Turn     int64     `json:"turn"`
	Samples  [2]int64  `json:"samples"` // raw sample range of the evidence, half open
	Key      string    `json:"key"`
	Subject  string    `json:"subject"`
	Kind     string    `json:"kind"`
	From     string    `json:"from"`
	To       string    `json:"to"`
	Severity string    `json:"severity"`
	Was      string    `json:"was"`
	Sentence string    `json:"sentence"`
	By       string    `json:"by,omitempty"`
	Note     string    `json:"note,omitempty"`
	Detail   any       `json:"detail,omitempty"`
	Order    int       `json:"first_up_order,omitempty"`
	Flood    bool      `json:"flood,omitempty"`
	Caution  string    `json:"caution"`
}

// TransitionRecord makes the record of a transition; t in seconds from the start of the recording.
func TransitionRecord(t float64, tr *alarm.Transition) TransitionLine {
	return TransitionLine{
		Type: "transition", TimeS: round(t, 7), ID: tr.ID, At: tr.At.UTC(), Turn: tr.Turn, Samples: [2]int64{tr.Seq0, tr.Seq1},
		Key: tr.Key, Subject: tr.Subject, Kind: tr.Kind, From: tr.From.String(), To: tr.To.String(), Severity: tr.Severity.String(), Was: tr.Was.String(),
		Sentence: tr.Sentence, By: tr.By, Note: tr.Note, Detail: tr.Detail, Order: tr.Order, Flood: tr.Flood, Caution: Caution,
	}
}
