package station

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"runtime/debug"
	"strings"
	"time"

	"github.com/klauspost/compress/zstd"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/skid"
	"lapwing/internal/still"
	"lapwing/internal/tape"
	"lapwing/internal/wire"
)

// What makes an analysis repeatable to the last bit: the whole state of the line, taken every so often between two
// blocks. A clip begins where one was taken and carries it; a review that starts with it goes on as the live line did.

// resume is all that the line's next turn depends on beside the samples and process values to come.
type resume struct {
	Line *Line
	Held *held
}

// stateRules: the skid file is given again, and the crew is goroutines.
var stateRules = still.Rules{
	Leave: []reflect.Type{reflect.TypeFor[*skid.Skid](), reflect.TypeFor[*crew]()},
	Make:  []reflect.Type{reflect.TypeFor[alarm.LimitDetail](), reflect.TypeFor[wire.Finding](), reflect.TypeFor[json.RawMessage]()},
}

// stateHead is the first line of a state file; behind it lies the picture, zstd.
type stateHead struct {
	Kind   string `json:"lapwing"` // "line state 1"
	Build  string `json:"build"`
	Skid   string `json:"skid_sha256"`
	Sample int64  `json:"at_sample"`
}

const (
	stateKind  = "line state 1"
	stateEvery = 20 * time.Second // a clip begins up to so much earlier than it was asked to, or a sixth of what an alarm protects
	mostStates = 6                // that reach back: each takes some megabytes
	mostState  = 1 << 30
)

// build names the program, so that somebody can find the same one again.
func build() string {
	b, ok := debug.ReadBuildInfo()
	if !ok {
		return "unknown"
	}
	s := b.Main.Version + " " + b.GoVersion
	for _, kv := range b.Settings {
		switch kv.Key {
		case "vcs.revision", "vcs.modified", "GOARCH":
			s += " " + kv.Value
		}
	}
	return s
}

// states are the newest states of the line, oldest first.
type states struct {
	every time.Duration // between two; 0: by what an alarm protects
	pack  *zstd.Encoder
	next  int64
	kept  []takenState
	last  time.Duration // what the newest one took
}

type takenState struct {
	seq  int64
	data []byte
}

// note takes a state when one is due, before the block that begins with sample end is added. States reach back as far as
// an alarm's clip does.
func (k *states) note(end int64, rate float64, reach time.Duration, sk *skid.Skid, l *Line, h *held) error {
	if n := len(k.kept); end < k.next && (n == 0 || end >= k.kept[n-1].seq) {
		return nil
	}
	if n := len(k.kept); n > 0 && end < k.kept[n-1].seq { // the source counts anew
		k.kept = k.kept[:0]
	}
	every := k.every
	if every == 0 {
		every = max(stateEvery, reach/mostStates)
	}
	k.next = end + int64(every.Seconds()*rate)
	began := time.Now()
	s, err := takeState(k, end, sk, l, h)
	if err != nil {
		return err
	}
	k.last = time.Since(began)
	k.kept = append(k.kept, s)
	for len(k.kept) > 1 && float64(end-k.kept[1].seq) > (reach+every).Seconds()*rate { // the next one is old enough
		k.kept = append(k.kept[:0], k.kept[1:]...)
	}
	return nil
}

func takeState(k *states, end int64, sk *skid.Skid, l *Line, h *held) (takenState, error) {
	pic, err := still.Take(&resume{l, h}, stateRules)
	if err != nil {
		return takenState{}, fmt.Errorf("station: state of the line: %w", err)
	}
	head, err := json.Marshal(stateHead{stateKind, build(), sk.Hash, end})
	if err != nil {
		return takenState{}, fmt.Errorf("station: state of the line: %w", err)
	}
	if k.pack == nil {
		if k.pack, err = zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithEncoderConcurrency(1)); err != nil {
			return takenState{}, fmt.Errorf("station: state of the line: %w", err)
		}
	}
	return takenState{end, k.pack.EncodeAll(pic, append(head, '\n'))}, nil
}

// before gives the newest state at or before a sample.
func (k *states) before(seq int64) (s takenState, ok bool) {
	for _, x := range k.kept {
		if x.seq <= seq {
			s, ok = x, true
		}
	}
	return s, ok
}

// cut asks the tape for a clip that begins with a state of the line where one is at hand.
func (s *Station) cut(c tape.Clip) (tape.Clip, error) {
	if st, ok := s.states.before(c.From); ok {
		c.From, c.State = st.seq, st.data
	}
	return s.tape.Protect(c)
}

// openResume reads a state file for a recording that begins at sample first. A state of another build or skid file is
// refused with the reason.
func openResume(path string, sk *skid.Skid, info acq.Info, first int64) (restore func(*Line, *held) error, remark string, err error) {
	raw, err := os.ReadFile(path)
	if err != nil {
		return nil, "", fmt.Errorf("review: state: %w", err)
	}
	line, body, ok := bytes.Cut(raw, []byte("\n"))
	var head stateHead
	if !ok || json.Unmarshal(line, &head) != nil || head.Kind != stateKind {
		return nil, "", fmt.Errorf("review: %s is no state of the line", path)
	}
	switch {
	case head.Skid != sk.Hash:
		return nil, "", fmt.Errorf("review: %s was taken with another skid file: review with the one beside the clip, or with --cold", path)
	case head.Sample != first:
		return nil, "", fmt.Errorf("review: %s was taken at sample %d, the recording begins at %d: review with --cold", path, head.Sample, first)
	}
	if head.Build != build() {
		remark = fmt.Sprintf("state: taken by another build (%s): records may differ from the live ones", head.Build)
	}
	d, err := zstd.NewReader(bytes.NewReader(body), zstd.WithDecoderMaxMemory(mostState))
	if err != nil {
		return nil, "", fmt.Errorf("review: state: %w", err)
	}
	defer d.Close()
	pic, err := io.ReadAll(io.LimitReader(d, mostState))
	if err != nil {
		return nil, "", fmt.Errorf("review: %s is damaged: %w", path, err)
	}
	return func(l *Line, h *held) error {
		err := still.Restore(&resume{l, h}, pic, stateRules)
		if errors.Is(err, still.ErrOther) {
			return fmt.Errorf("review: %s fits the version of the program that took it (%s): use that one, or --cold", path, head.Build)
		}
		return err
	}, remark, nil
}

// stateBeside is the state file that an exported clip has beside it; "" when there is none.
func stateBeside(recording string) string {
	path := strings.TrimSuffix(recording, filepath.Ext(recording)) + ".state"
	if _, err := os.Stat(path); err != nil {
		return ""
	}
	return path
}

// goOn makes a line that has taken over another one's state a reviewer's: it counts anew, and writes the records asked for.
func (l *Line) goOn(records Records, c *crew) {
	l.records, l.crew, l.out = records, c, nil
	l.count = Count{Reasons: map[string]int64{}}
	l.whole = math.MinInt64 / 2
}
