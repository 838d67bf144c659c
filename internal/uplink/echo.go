package uplink

import (
	"fmt"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

// echo looks whether what this daemon writes arrives. A broker may acknowledge a message that its access list forbids and
// throw it away: MQTT 3.1.1 has no word for that (section 3.3.5). So the daemon reads its own health, which must come back.
type echo struct{ late *time.Timer }

// listen subscribes once on a connection, before the health is sent whose echo is awaited. At QoS 0, as for commands.
func (b *pump) listen() {
	if b.echo.late != nil {
		return
	}
	p, topic := b.p, b.p.cfg.Topics.Health()
	late := time.AfterFunc(p.cfg.wait.ack, func() {
		why := fmt.Sprintf("the broker acknowledges %s and does not give it back: its access list may not let this user write, or not read, that topic; alarms may be thrown away in the same way", topic)
		p.cfg.Log.Error("uplink: not heard", "err", why)
		p.note(func(s *Status) { s.Unheard = why })
	})
	b.echo.late = late
	b.c.Subscribe(topic, 0, func(_ mqtt.Client, m mqtt.Message) {
		if m.Retained() { // of an earlier connection
			return
		}
		late.Stop()
		p.note(func(s *Status) { s.Unheard, s.Echoes = "", s.Echoes+1 })
	})
}

func (e *echo) end() {
	if e.late != nil {
		e.late.Stop()
	}
}
