package demo

import (
	"bytes"
	"fmt"
	"log/slog"
	"net"

	mqtt "github.com/mochi-mqtt/server/v2"
	"github.com/mochi-mqtt/server/v2/listeners"
	"github.com/mochi-mqtt/server/v2/packets"
)

// broker is an MQTT broker inside the process, on loopback, for the demo only: the daemon never links it.
type broker struct {
	srv  *mqtt.Server
	addr string
}

func openBroker() (*broker, error) {
	srv := mqtt.New(&mqtt.Options{Logger: slog.New(slog.DiscardHandler)})
	if err := srv.AddHook(new(open), nil); err != nil {
		return nil, fmt.Errorf("demo: broker: %w", err)
	}
	ln, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return nil, fmt.Errorf("demo: broker: %w", err)
	}
	addr := ln.Addr().String()
	if err := srv.AddListener(listeners.NewNet("demo", ln)); err != nil {
		return nil, fmt.Errorf("demo: broker: %w", err)
	}
	if err := srv.Serve(); err != nil {
		return nil, fmt.Errorf("demo: broker: %w", err)
	}
	return &broker{srv: srv, addr: "tcp://" + addr}, nil
}

func (b *broker) close() error { return b.srv.Close() }

// open lets every client on this machine in: the broker lives as long as the demo.
type open struct{ mqtt.HookBase }

func (*open) ID() string { return "open" }

func (*open) Provides(b byte) bool {
	return bytes.Contains([]byte{mqtt.OnConnectAuthenticate, mqtt.OnACLCheck}, []byte{b})
}

func (*open) OnConnectAuthenticate(*mqtt.Client, packets.Packet) bool { return true }

func (*open) OnACLCheck(*mqtt.Client, string, bool) bool { return true }
