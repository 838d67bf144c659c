package station

import (
	"context"
	"fmt"
	"time"

	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// certWarn is how long before its end a certificate is spoken of: the control room goes blind when it ends.
const certWarn = 30 * 24 * time.Hour

// commands lets the control room give the orders that the skid file allows; nil when it allows none. They are for the
// file's broker, whose access list guards them, and for no other.
func (s *Station) commands() *uplink.Commands {
	if len(s.sk.Uplink.Commands) == 0 {
		return nil
	}
	if s.o.Broker != "" {
		s.log.Warn("commands over MQTT are off: the skid file allows them at its own broker only")
		return nil
	}
	return &uplink.Commands{Allowed: s.sk.Uplink.Commands, Take: s.command}
}

// command has an order carried out that came over MQTT or, with a refusal, booked as refused.
func (s *Station) command(ctx context.Context, o Order, refusal error) (r wire.Receipt, err error) {
	if err = s.between(ctx, func() { r = s.decide(o, refusal) }); err != nil {
		return wire.Receipt{}, fmt.Errorf("station: command: %w", err)
	}
	return r, nil
}

// rebirth sends health and standing alarms to the control room again.
func (s *Station) rebirth() (done, error) {
	if s.pub == nil {
		return done{}, fmt.Errorf("there is no broker to send anything to")
	}
	s.offerHealth()
	s.pub.Renew()
	return done{said: "health and standing alarms are sent again"}, nil
}

// uplinkTroubles says what stands between this monitor and the control room.
func (s *Station) uplinkTroubles(st *uplink.Status, now time.Time) (out []string) {
	box := s.ledger.Stats()
	waiting, lost := 0, uint64(0)
	for _, n := range box.Waiting {
		waiting += n
	}
	for _, n := range box.Dropped {
		lost += n
	}
	if !st.Connected && st.LastError != "" {
		out = append(out, fmt.Sprintf("the control room does not hear this monitor: %s; %d messages wait", st.LastError, waiting))
	}
	if st.Unheard != "" {
		out = append(out, "it is not sure that the control room hears this monitor: "+st.Unheard)
	}
	if lost > 0 {
		out = append(out, fmt.Sprintf("%d messages to the control room gave way to newer ones while the broker was away; their transitions are in the journal", lost))
	}
	if c := st.Commands; c != nil && c.LastError != "" {
		out = append(out, "commands of the control room are not heard: "+c.LastError)
	}
	if st.Connected && !st.CertUntil.IsZero() && st.CertUntil.Sub(now) < certWarn {
		out = append(out, fmt.Sprintf("a certificate of the connection to the broker ends on %s: renew it before", st.CertUntil.Format("2006-01-02")))
	}
	return out
}
