package main

import (
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// TestSystemLatency states how long it takes from the turn that makes a transition to its message at a subscriber on
// loopback, through a real daemon in real time and a real mosquitto. No figure decides it. LAPWING_LATENCY says for how
// long it looks, e.g. 120s.
func TestSystemLatency(t *testing.T) {
	system(t)
	length, err := time.ParseDuration(os.Getenv("LAPWING_LATENCY"))
	if err != nil {
		t.Skip("short run: figures are made by make latency")
	}
	dir := t.TempDir()
	b := startBroker(t)
	skid := skidFile(t, dir, "limits", restlessLimits(), "broker", b.url(), "max_gb", "0.2", "listen", "none", "features_every_s", "1")
	ctx, stop := context.WithCancel(t.Context())
	var mu sync.Mutex
	var period time.Duration       // of the newest features
	var all, after []time.Duration // from the dead centre that begins the turn, and from the one that ends it
	heard := make(chan error, 1)
	joined := make(chan struct{}, 1)
	go func() {
		heard <- uplink.Listen(ctx, uplink.Config{Broker: b.url(), ClientID: "latency"}, "lapwing", func(m uplink.Received) {
			now := time.Now()
			mu.Lock()
			defer mu.Unlock()
			var f wire.Features
			if strings.Contains(m.Topic, "/features/") && json.Unmarshal(m.Payload, &f) == nil && f.RPM != nil {
				period = time.Duration(float64(time.Minute) / *f.RPM)
			}
			var a wire.Alarm
			if strings.HasSuffix(m.Topic, "/alarm") && json.Unmarshal(m.Payload, &a) == nil && period > 0 {
				all = append(all, now.Sub(a.At))
				after = append(after, now.Sub(a.At)-period)
			}
		}, func(string) {
			select {
			case joined <- struct{}{}:
			default:
			}
		})
	}()
	select {
	case <-joined:
	case err := <-heard:
		t.Fatal(err)
	}
	for end := time.Now().Add(length); time.Now().Before(end); {
		d := start(t, nil, built(t, "lapwingd"), "--skid", skid, "--state", filepath.Join(dir, "state"), "--source", "model:unsteady")
		<-time.After(min(length, 100*time.Second))
		d.terminate(20 * time.Second)
	}
	stop()
	if err := <-heard; err != nil {
		t.Error(err)
	}
	if len(all) == 0 {
		t.Fatal("no transition came")
	}
	slices.Sort(all)
	slices.Sort(after)
	q := func(d []time.Duration, p float64) time.Duration {
		return d[int(p*float64(len(d)-1)+0.5)].Round(100 * time.Microsecond)
	}
	for _, d := range []struct {
		what string
		d    []time.Duration
	}{{"beginning", all}, {"end", after}} {
		t.Logf("%d transitions; from the turn's %s to the message: p50 %s, p90 %s, p99 %s, largest %s", len(d.d), d.what, q(d.d, 0.5), q(d.d, 0.9), q(d.d, 0.99), q(d.d, 1))
	}
}
