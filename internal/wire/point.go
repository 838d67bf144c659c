package wire

import (
	"time"

	"lapwing/internal/alarm"
)

// Alarms is every alarm point with what is shown of it and what is not: GET /api/v1/alarms. Schema: alarms.
type Alarms struct {
	Version int     `json:"v"`
	Skid    string  `json:"skid,omitempty"`
	Flood   bool    `json:"flood,omitempty"` // more alarms come in than a person can follow
	Points  []Point `json:"points"`          // by key
	Caution string  `json:"caution"`
}

// Point is one alarm point.
type Point struct {
	Key      string    `json:"key"`
	Subject  string    `json:"subject"`
	Kind     string    `json:"kind"`
	State    string    `json:"state"`
	Severity string    `json:"severity"` // as it is shown: none unless it asks something of a person
	Since    time.Time `json:"since,omitzero"`
	Sentence string    `json:"sentence,omitempty"`
	Note     string    `json:"note,omitempty"` // of the last transition
	Turn     int64     `json:"turn"`
	Judged   bool      `json:"judged"` // the last evaluation could judge it
	Order    int       `json:"first_up_order,omitempty"`
	Behind   string    `json:"behind,omitempty"`          // state behind a shelf, a suppression or out of service
	Level    string    `json:"severity_behind,omitempty"` // and its severity
	Chatters bool      `json:"chattering,omitempty"`
	Shelf    *Shelf    `json:"shelf,omitempty"`
	Out      *OutOf    `json:"out_of_service,omitempty"`
	ByDesign string    `json:"suppressed_by_design,omitempty"` // why
}

// Shelf is who shelved a point, until when and why.
type Shelf struct {
	By     string    `json:"by"`
	Until  time.Time `json:"until"`
	Reason string    `json:"reason,omitempty"`
}

// OutOf is who took a point out of service, and why.
type OutOf struct {
	By     string `json:"by"`
	Reason string `json:"reason,omitempty"`
}

// FromState puts a point into its outside form.
func FromState(p *alarm.Point) Point {
	w := Point{Key: p.Key, Subject: p.Subject, Kind: p.Kind, State: p.State.String(), Severity: p.Severity.String(), Since: p.Since.UTC(), Sentence: p.Sentence, Note: p.Note,
		Turn: p.Turn, Judged: p.Judged, Order: p.Order, Chatters: p.Chattering, ByDesign: p.ByDesign}
	if p.State == alarm.Shelved || p.State == alarm.Suppressed || p.State == alarm.OutOfService {
		w.Behind, w.Level = p.Inner.String(), p.Level.String()
	}
	if !p.ShelvedUntil.IsZero() {
		w.Shelf = &Shelf{By: p.ShelvedBy, Until: p.ShelvedUntil.UTC(), Reason: p.ShelvedWhy}
	}
	if p.OutBy != "" {
		w.Out = &OutOf{By: p.OutBy, Reason: p.OutWhy}
	}
	return w
}
