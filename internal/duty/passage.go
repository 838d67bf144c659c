package duty

import "time"

// Passage is the resonance of a gauge passage that was undone on a pressure channel while a baseline was learnt: its
// measures hold only while the same one is undone.
type Passage struct {
	Channel string    `json:"channel"`
	Hz      float64   `json:"hz"`
	Q       float64   `json:"q"`
	HzU     float64   `json:"hz_u,omitempty"` // 95 % half-widths
	QU      float64   `json:"q_u,omitempty"`
	Fall    float64   `json:"fall,omitempty"`   // passage.Found.Fall
	Orders  float64   `json:"orders,omitempty"` // of the shaft
	Found   time.Time `json:"found,omitzero"`
}

// Zero is what was taken off a pressure channel while a baseline was learnt, as its zero had drifted since an earlier one.
type Zero struct {
	Channel string  `json:"channel"`
	Pa      float64 `json:"pa"`
}
