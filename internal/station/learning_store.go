package station

import (
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"lapwing/internal/duty"
	"lapwing/internal/ledger"
	"lapwing/internal/measure"
	"lapwing/internal/panel"
	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// Baselines lists the stored baselines, oldest first, with whether each could judge this machine. Any goroutine.
func (s *Station) Baselines() ([]wire.Baseline, error) {
	var inForce uint64
	if w := s.Learning(); w != nil && w.InForce != nil {
		inForce = w.InForce.ID
	}
	return baselines(s.ledger, inForce, func(b *duty.Baseline) error { return b.Fits(s.line.layout, s.sk.Hash, false) })
}

// Baseline gives one stored baseline as the file that is exported; the newest for 0. Any goroutine.
func (s *Station) Baseline(id uint64) ([]byte, error) { return baselineFile(s.ledger, id) }

func baselines(l *ledger.Ledger, inForce uint64, fits func(*duty.Baseline) error) ([]wire.Baseline, error) {
	list, err := l.Baselines()
	out := make([]wire.Baseline, 0, len(list))
	for _, i := range list {
		raw, berr := baselineFile(l, i.Version)
		var b *duty.Baseline
		if berr == nil {
			b, berr = duty.ParseBaseline(raw)
		}
		if berr != nil {
			out = append(out, wire.Baseline{ID: i.Version, Created: i.Created, Note: i.Note, Doubts: []string{}, Unusable: berr.Error()})
			continue
		}
		w := wireBaseline(b, i.Version)
		w.InForce = i.Version == inForce
		if err := fits(b); err != nil {
			w.Unusable = err.Error()
		}
		out = append(out, w)
	}
	return out, err
}

func baselineFile(l *ledger.Ledger, id uint64) ([]byte, error) {
	var raw json.RawMessage
	_, ok, err := l.Baseline(id, &raw)
	switch {
	case err != nil:
		return nil, err
	case !ok:
		return nil, fmt.Errorf("station: baseline %d: %w", id, panel.ErrNoBaseline)
	}
	b, err := duty.ParseBaseline(raw)
	if err != nil {
		return nil, err
	}
	return b.Encode() // as the file that was once imported or learnt
}

// LayoutOf gives the measures of the machine of a skid file.
func LayoutOf(sk *skid.Skid) measure.Layout { return measure.NewLayout(measureMachine(sk)) }

// LoadBaseline reads a baseline file and checks it against a skid file. anySkid lets another version of it pass.
func LoadBaseline(path string, sk *skid.Skid, anySkid bool) (*duty.Baseline, error) {
	raw, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("station: baseline: %w", err)
	}
	b, err := duty.ParseBaseline(raw)
	if err == nil {
		err = b.Fits(LayoutOf(sk), sk.Hash, anySkid)
	}
	if err != nil {
		return nil, fmt.Errorf("station: %s: %w", path, err)
	}
	return b, nil
}

// stateFile opens the state file of a daemon that is down. It makes none.
func stateFile(state string) (*ledger.Ledger, error) {
	path := filepath.Join(state, "state.db")
	if _, err := os.Stat(path); err != nil {
		return nil, fmt.Errorf("station: %s is no state folder: %w", state, err)
	}
	l, err := ledger.Open(path, ledger.Options{})
	if err != nil {
		return nil, fmt.Errorf("%w (is the daemon running? then ask it with --daemon)", err)
	}
	return l, nil
}

// BaselinesIn lists the baselines of a daemon that is down. The newest is the one that it would judge by.
func BaselinesIn(state string) (out []wire.Baseline, err error) {
	l, err := stateFile(state)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, l.Close()) }()
	list, err := l.Baselines()
	if err != nil {
		return nil, err
	}
	var newest uint64
	for _, i := range list {
		newest = max(newest, i.Version)
	}
	return baselines(l, newest, func(*duty.Baseline) error { return nil })
}

// BaselineIn gives one baseline of a daemon that is down; the newest for 0.
func BaselineIn(state string, id uint64) (raw []byte, err error) {
	l, err := stateFile(state)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, l.Close()) }()
	return baselineFile(l, id)
}

// ImportInto stores a baseline in the state folder of a daemon that is down; it is in force when the daemon starts.
func ImportInto(state string, b *duty.Baseline, by, why string) (id uint64, err error) {
	l, err := stateFile(state)
	if err != nil {
		return 0, err
	}
	defer func() { err = errors.Join(err, l.Close()) }()
	raw, err := b.Encode()
	if err != nil {
		return 0, err
	}
	err = l.Commit(func(tx *ledger.Tx) error {
		if id, err = tx.PutBaseline(fmt.Sprintf("imported by %s: %s", by, why), json.RawMessage(raw)); err != nil {
			return err
		}
		return tx.DeleteDoc(docLearning)
	})
	return id, err
}
