package wire

import (
	"encoding/json"
	"time"
)

// Now is one immutable snapshot of everything's present state: what the page, the API and the health message show.
type Now struct {
	Skid     string    `json:"skid"`
	Name     string    `json:"name"`
	Site     string    `json:"site,omitempty"`
	At       time.Time `json:"at,omitzero"`
	Health   Health    `json:"health"`
	Latest   *Turn     `json:"latest,omitempty"` // newest turn record
	Findings []Finding `json:"findings"`
	Standing []Alarm   `json:"standing"` // alarm points that are not normal
	Journal  []Alarm   `json:"journal"`  // newest first, the last few
	Clips    []Clip    `json:"clips"`
	Caution  string    `json:"caution"`
}

// Health is what the daemon knows of itself. State is that of the shaft ("running",
// "coasting", "starting", "standstill", "lost", "unknown") or "offline".
type Health struct {
	Version     int              `json:"v"`
	Skid        string           `json:"skid"`
	At          time.Time        `json:"at,omitzero"` // UTC
	State       string           `json:"state"`
	Line        string           `json:"line"`                      // one clause for people: learning, watching, why not
	Heartbeat   float64          `json:"heartbeat_s,omitempty"`     // s; the message comes again by then
	Category    string           `json:"category"`                  // of the daemon as a whole, NAMUR NE 107
	CategoryWhy string           `json:"category_reason,omitempty"` // why it is not good
	Turns       int64            `json:"turns"`
	BadTurns    int64            `json:"turns_not_valid"`
	BadBy       map[string]int64 `json:"turns_not_valid_by_reason,omitempty"`
	RPM         *float64         `json:"speed_rpm,omitempty"`
	Learned     bool             `json:"baseline"`
	LearnLeft   int              `json:"learning_turns_left"`
	SamplesLost int64            `json:"samples_lost"`
	QueueFull   int64            `json:"blocks_dropped_before_line"`
	Load        *float64         `json:"line_load_percent,omitempty"`       // time the line was at work over the time the samples took, last minute of samples
	LoadWorst   *float64         `json:"line_load_worst_percent,omitempty"` // the same of the minute's slowest second
	Queue       int              `json:"line_queue_blocks"`                 // blocks that wait for the line
	QueueMost   int              `json:"line_queue_most_blocks"`            // most that waited within the last minute of samples
	QueueLimit  int              `json:"line_queue_limit_blocks"`           // beyond it blocks are dropped
	Channels    []Channel        `json:"channels,omitempty"`
	Tape        TapeHealth       `json:"tape"`
	Uplink      any              `json:"uplink,omitempty"`
	Trouble     []string         `json:"trouble,omitempty"` // what somebody should look at, in plain words
}

// Channel is how one input is doing. State is a category of NAMUR NE 107, and "good" or "function check" otherwise: a
// channel in failure or out of specification is not used; one that requires maintenance is.
type Channel struct {
	ID        string `json:"id"`
	Kind      string `json:"kind"`            // phase, pressure, acceleration
	Place     string `json:"place,omitempty"` // t1.he, t1
	State     string `json:"state"`
	Fault     string `json:"fault,omitempty"`  // flat, open cable, hum …
	Reason    string `json:"reason,omitempty"` // one sentence
	SinceTurn int64  `json:"since_turn,omitempty"`
}

// Offline is the health message that the broker gives out when the daemon is gone: nothing else is known then, not
// even since when.
func Offline(skid string) []byte {
	b, err := json.Marshal(struct {
		Version  int    `json:"v"`
		Skid     string `json:"skid"`
		State    string `json:"state"`
		Line     string `json:"line"`
		Category string `json:"category"`
	}{1, skid, "offline", "the monitor is not connected: nobody watches the valves", "failure"})
	if err != nil {
		panic(err) // a struct of strings always encodes
	}
	return b
}

// TapeHealth is the raw buffer's part of health.
type TapeHealth struct {
	Bytes    int64     `json:"bytes"`
	Limit    int64     `json:"limit_bytes"`
	Oldest   time.Time `json:"oldest,omitzero"`
	Newest   time.Time `json:"newest,omitzero"`
	Dropped  int64     `json:"blocks_dropped"`
	Clips    int       `json:"clips"`
	Rate     *float64  `json:"written_bytes_per_s,omitempty"` // to the disk, over the last ten seconds or more
	Behind   *float64  `json:"not_on_disk_s,omitempty"`       // samples that have come and are not committed
	Problems []string  `json:"problems,omitempty"`
}

// Clip is one protected stretch of raw samples.
type Clip struct {
	ID       string    `json:"id"`
	Reason   string    `json:"reason"`
	Alarms   []uint64  `json:"alarms,omitempty"`
	From     time.Time `json:"from,omitzero"`
	To       time.Time `json:"to,omitzero"`
	Samples  [2]int64  `json:"samples"`
	Complete bool      `json:"complete"`
	Bytes    int64     `json:"bytes"`
}
