package wire

import (
	"encoding/json"
	"fmt"
	"time"

	"lapwing/internal/measure"
)

// Features is one throw's condensed features: the latest turn's values, absent ones left out with their reason counted.
type Features struct {
	Version int                           `json:"v"`
	Skid    string                        `json:"skid"`
	Throw   string                        `json:"throw"`
	At      time.Time                     `json:"at,omitzero"` // UTC
	Turn    int64                         `json:"turn"`
	RPM     *float64                      `json:"speed_rpm,omitempty"`
	Duty    string                        `json:"duty"`
	Values  map[string]map[string]float64 `json:"values"`               // subject → name → value
	Absent  int                           `json:"absent"`               // features that could not be known this turn
	Why     map[string]int                `json:"absent_why,omitempty"` // reason → how many
}

// FromVector encodes one throw's part of a vector.
func FromVector(skid, throw string, index int, layout measure.Layout, v *measure.Vector, at time.Time, duty string) ([]byte, error) {
	f := Features{Version: 1, Skid: skid, Throw: throw, At: at.UTC(), Turn: v.Turn, RPM: opt(round(v.RPM, 2)), Duty: duty, Values: map[string]map[string]float64{}}
	for i := range layout {
		d := &layout[i]
		if d.Throw != index {
			continue
		}
		x := opt(v.V[i]*d.Scale + d.Shift)
		if x == nil {
			f.Absent++
			if v.Why[i] != "" {
				if f.Why == nil {
					f.Why = map[string]int{}
				}
				f.Why[v.Why[i]]++
			}
			continue
		}
		m := f.Values[d.Subject]
		if m == nil {
			m = map[string]float64{}
			f.Values[d.Subject] = m
		}
		m[d.Name] = figures(*x, 7)
	}
	b, err := json.Marshal(f)
	if err != nil {
		return nil, fmt.Errorf("wire: features of %s: %w", throw, err)
	}
	return b, nil
}
