package sparkplug

import (
	"encoding/json"
	"errors"
	"fmt"
)

// Host remembers what a primary host has said of itself.
type Host struct {
	heard  bool
	at     int64
	online bool
}

const maxState = 4096 // bytes

// Hear takes a STATE message. One that is older than what is known changes nothing: a will may be delivered after the
// host has come back (tck-id-message-flow-edge-node-birth-publish-phid-wait-timestamp,
// tck-id-operational-behavior-edge-node-termination-host-offline-timestamp).
func (h *Host) Hear(payload []byte) error {
	if len(payload) > maxState {
		return fmt.Errorf("sparkplug: a STATE message of %d bytes", len(payload))
	}
	var m struct {
		Online *bool  `json:"online"`
		At     *int64 `json:"timestamp"`
	}
	if err := json.Unmarshal(payload, &m); err != nil {
		return fmt.Errorf("sparkplug: STATE: %w", err)
	}
	if m.Online == nil || m.At == nil {
		return errors.New("sparkplug: STATE wants online and timestamp")
	}
	if h.heard && *m.At < h.at {
		return nil
	}
	h.heard, h.at, h.online = true, *m.At, *m.Online
	return nil
}

// Online tells whether the host has said that it is there (tck-id-message-flow-edge-node-birth-publish-phid-wait-online).
func (h *Host) Online() bool { return h.online }

// Forget begins a new session with the broker: what it retains is heard again, and nothing is taken as known.
func (h *Host) Forget() { *h = Host{} }
