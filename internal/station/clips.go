package station

import (
	"fmt"
	"os"
	"path/filepath"

	"lapwing/internal/tape"
	"lapwing/internal/wire"
)

// openState opens the tape of a daemon that is down.
func openState(state string) (*tape.Tape, error) {
	path := filepath.Join(state, "tape.db")
	if _, err := os.Stat(path); err != nil {
		return nil, fmt.Errorf("station: no tape in %s: %w", state, err)
	}
	t, err := tape.OpenRead(path)
	if err != nil {
		return nil, fmt.Errorf("%w (is the daemon running? then leave --state out)", err)
	}
	return t, nil
}

// ClipsIn lists the clips of a daemon that is down.
func ClipsIn(state string) ([]wire.Clip, error) {
	t, err := openState(state)
	if err != nil {
		return nil, err
	}
	defer t.Close()
	return wireClips(t, t.Info().Rate, t.Info().Start), nil
}
