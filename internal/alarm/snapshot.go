package alarm

import (
	"fmt"
	"slices"
	"time"
)

// Snapshot is everything an Annunciator remembers, as plain JSON. Store it in the same transaction as the transitions
// that led to it: then a restart repeats nothing and forgets nothing.
type Snapshot struct {
	Version int         `json:"version"`
	NextID  uint64      `json:"next_id"`
	Order   int         `json:"order"`
	Flood   bool        `json:"flood"`
	Recent  []time.Time `json:"recent,omitempty"`
	Points  []Point     `json:"points"`
}

const snapshotVersion = 1

// Snapshot copies the present state; points by key.
func (a *Annunciator) Snapshot() Snapshot {
	return Snapshot{Version: snapshotVersion, NextID: a.nextID, Order: a.order, Flood: a.flood, Recent: slices.Clone(a.recent), Points: a.Points()}
}

// Restore replaces the present state by a snapshot's. On an error nothing has changed.
func (a *Annunciator) Restore(s Snapshot) error {
	if s.Version != snapshotVersion {
		return fmt.Errorf("alarm: restore: snapshot version %d, this program reads %d", s.Version, snapshotVersion)
	}
	if s.NextID == 0 {
		return fmt.Errorf("alarm: restore: next id is 0, ids begin at 1")
	}
	points := make(map[string]*Point, len(s.Points))
	for _, p := range s.Points {
		if p.Key == "" || points[p.Key] != nil {
			return fmt.Errorf("alarm: restore: point %q is empty or doubled", p.Key)
		}
		p.Recent = slices.Clone(p.Recent)
		points[p.Key] = &p
	}
	a.points, a.nextID, a.order, a.flood, a.recent = points, s.NextID, s.Order, s.Flood, slices.Clone(s.Recent)
	return nil
}
