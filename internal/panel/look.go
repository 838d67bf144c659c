package panel

import (
	"context"
	"errors"
	"time"

	"lapwing/internal/chart"
	"lapwing/internal/wire"
)

// ErrNoReference says that there is no turn of old to hold the present one against. Looker.Reference wraps it.
var ErrNoReference = errors.New("no reference clip yet")

// Looker is what a Source may have beside: pictures of turns, and raw signals. Both are made only while somebody asks.
type Looker interface {
	// Throws lists the throws of the machine.
	Throws() []Throw
	// Look gives the newest picture of a throw; nil when none has been made yet or there is no such throw. Asking has the
	// line make pictures for some seconds to come.
	Look(throw string) *Look
	// Reference gives a turn of the newest reference clip. It may take some seconds; ErrNoReference when there is none.
	Reference(ctx context.Context, throw string) (*Look, error)
	// Signal gives about the newest second of a channel; nil when it has not been gathered yet or there is no such channel.
	// Asking has it gathered for some seconds to come.
	Signal(channel string) *Signal
}

// Throw is one throw with what belongs to it.
type Throw struct {
	ID       string   `json:"throw"`
	Stage    int      `json:"stage"`
	Ends     []string `json:"ends"`     // he, ce: those that work
	Channels []string `json:"channels"` // its pressures and accelerometers
}

// Look is one throw in one turn, taken out of the line. It never changes.
type Look struct {
	Throw    string
	Turn     int64
	At       time.Time
	Picture  chart.Cylinder
	Measures []wire.WhyMeasure // what is known of it in this turn, in the order of the layout, with what was expected
	Record   *wire.TurnThrow   // its part of the turn's record, with the events; nil: not known
	Against  string            // why there are no expected values; empty: there are
}

// Signal is about a second of one channel in people's units. It never changes.
type Signal struct {
	Channel string
	Kind    string // pressure, acceleration, phase
	Unit    string
	Density string // unit of its spectral density
	Rate    float64
	Seq0    int64 // sample number of the first
	At      time.Time
	V       []float64
	Full    [2]float64 // what the converter can show
	Bands   [][2]float64
}
