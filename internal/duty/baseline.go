package duty

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"time"

	"lapwing/internal/measure"
)

// Header says what a baseline belongs to and where it came from. The caller fills it.
type Header struct {
	SkidHash string    `json:"skid_hash"`
	Created  time.Time `json:"created"`
	Turn0    int64     `json:"turn0"` // first and last turn learnt from
	Turn1    int64     `json:"turn1"`
	Note     string    `json:"note,omitempty"`     // why the machine was declared healthy
	Passages []Passage `json:"passages,omitempty"` // gauge passages undone beside those of the skid file
	Zeros    []Zero    `json:"zeros,omitempty"`    // what was taken off pressures whose zero had drifted

	Kind    Kind      `json:"kind,omitempty"`
	Subject string    `json:"subject,omitempty"` // what was learnt anew
	By      string    `json:"by,omitempty"`      // who declared the machine healthy
	Over    time.Time `json:"over,omitzero"`     // Created of the baseline that this one changes
	Doubts  []Doubt   `json:"doubts,omitempty"`  // what the examination at the end of the run found
}

// Kind says how a baseline came to be.
type Kind string

// The kinds.
const (
	Learnt  Kind = "learnt"  // from nothing
	Added   Kind = "added"   // load steps added to an older one
	Renewed Kind = "renewed" // a part learnt anew after work on it
)

// Baseline is what a machine showed when healthy, by throw and load step. Plain JSON; frozen once made.
type Baseline struct {
	Version    int    `json:"version"`
	LayoutHash string `json:"layout_hash"`
	Header
	Cells []Cell `json:"cells"`
}

const baselineVersion = 1

// Cell is one throw at one load step. Inferred cells belong to duties read off the traces alone.
type Cell struct {
	Throw    int                         `json:"throw"`
	Step     int                         `json:"step"`
	Inferred bool                        `json:"inferred"`
	Turns    int                         `json:"turns"`
	Shape    Shape                       `json:"shape"`
	Inverse  [numTerms][numTerms]float64 `json:"inverse"` // for the leverage of a duty
	MaxLev   float64                     `json:"max_leverage"`
	Models   []Model                     `json:"models"`
}

// Model is one feature of a cell. All numbers in the feature's SI unit.
type Model struct {
	Subject string            `json:"subject"`
	Name    string            `json:"name"`
	Turns   int               `json:"turns"` // turns that had the feature
	Coef    [numTerms]float64 `json:"coef"`
	Spread  float64           `json:"spread"` // robust standard deviation of a turn's residual
	Lag1    float64           `json:"lag1"`   // correlation of neighbouring turns' residuals, 0..0.9
	Sys     float64           `json:"sys"`    // standard deviation that averaging does not remove
	Lo      [numVars]float64  `json:"lo"`     // duties at which this feature was seen
	Hi      [numVars]float64  `json:"hi"`
}

// Encode writes the baseline as JSON.
func (b *Baseline) Encode() ([]byte, error) {
	out, err := json.MarshalIndent(b, "", " ")
	if err != nil {
		return nil, fmt.Errorf("duty: encode baseline: %w", err)
	}
	return out, nil
}

// ParseBaseline reads what Encode wrote, strictly.
func ParseBaseline(data []byte) (*Baseline, error) {
	d := json.NewDecoder(bytes.NewReader(data))
	d.DisallowUnknownFields()
	var b Baseline
	if err := d.Decode(&b); err != nil {
		return nil, fmt.Errorf("duty: baseline: %w", err)
	}
	if b.Version != baselineVersion {
		return nil, fmt.Errorf("duty: baseline: version %d, this program reads %d", b.Version, baselineVersion)
	}
	for i, c := range b.Cells {
		for v := range numVars {
			if !(c.Shape.Scale[v] > 0) {
				return nil, fmt.Errorf("duty: baseline: cells[%d].shape.scale[%d]: %g must be above 0", i, v, c.Shape.Scale[v])
			}
		}
		if !(c.MaxLev > 0) {
			return nil, fmt.Errorf("duty: baseline: cells[%d].max_leverage: %g must be above 0", i, c.MaxLev)
		}
		for j, m := range c.Models {
			if !(m.Sys > 0) || m.Spread < 0 || m.Lag1 < 0 || m.Lag1 > 0.9 {
				return nil, fmt.Errorf("duty: baseline: cells[%d].models[%d] %s %s: spread %g, lag1 %g, sys %g out of range",
					i, j, m.Subject, m.Name, m.Spread, m.Lag1, m.Sys)
			}
		}
	}
	return &b, nil
}

// Fits tells whether the baseline may judge a machine: the same features, and the same skid file. anySkid lets another
// version of the skid file pass, as one in which nothing but an address was changed.
func (b *Baseline) Fits(layout measure.Layout, skidHash string, anySkid bool) error {
	if _, err := b.Reference(layout); err != nil {
		return err
	}
	if b.SkidHash != skidHash && !anySkid {
		return fmt.Errorf("duty: the baseline was learnt with another version of the skid file (%s, now %s): geometry, clearances or channels may be others", short(b.SkidHash), short(skidHash))
	}
	for i, c := range b.Cells {
		for _, m := range c.Models {
			if layout.Find(m.Subject, m.Name) < 0 {
				return fmt.Errorf("duty: baseline: cells[%d]: this machine has no %s %s", i, m.Subject, m.Name)
			}
		}
	}
	return nil
}

func short(hash string) string {
	if len(hash) > 12 {
		return hash[:12]
	}
	return hash
}

// layoutHash names a layout by what a baseline depends on: subjects, names and scales, in order.
func layoutHash(l measure.Layout) string {
	h := uint64(14695981039346656037) // FNV-1a, 64 bit
	for _, f := range l {
		for _, c := range []byte(fmt.Sprintf("%s|%s|%g;", f.Subject, f.Name, f.Scale)) {
			h = (h ^ uint64(c)) * 1099511628211
		}
	}
	return fmt.Sprintf("%016x", h)
}

func (b *Baseline) cell(throw, step int, inferred bool) *Cell {
	for i := range b.Cells {
		if c := &b.Cells[i]; c.Throw == throw && c.Step == step && c.Inferred == inferred {
			return c
		}
	}
	return nil
}

func (c *Cell) model(subject, name string) *Model {
	for i := range c.Models {
		if m := &c.Models[i]; m.Subject == subject && m.Name == name {
			return m
		}
	}
	return nil
}

// blockSpread is the standard deviation of the median of n residuals: 1.57 s²/n is a median's variance under Gaussian
// noise, (1+φ)/(1−φ) the price of correlated neighbours, and Sys stays whatever is averaged (vibration.md section 1).
func (m *Model) blockSpread(n int) float64 {
	return math.Sqrt(1.57*m.Spread*m.Spread/float64(n)*(1+m.Lag1)/(1-m.Lag1) + m.Sys*m.Sys)
}
