// Command fleet plays the uplinks of many skids against real brokers on loopback: one mosquitto, or a cluster of three
// nats-servers of which one is killed and brought back again and again. It fails unless a subscriber sees every
// transition of every skid once, repeats dropped by id, and of mosquitto in order.
package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"math/rand/v2"
	"os"
	"slices"
	"time"
)

func main() {
	kind := flag.String("broker", "mosquitto", "mosquitto or nats")
	nats := flag.String("nats", "out/fleet/nats-server", "the nats-server program")
	skids := flag.Int("skids", 500, "how many")
	every := flag.Duration("every", 4*time.Second, "one transition of each skid")
	length := flag.Duration("for", time.Minute, "how long transitions are made")
	kills := flag.Int("kills", 4, "how often a broker is killed")
	seed := flag.Uint64("seed", uint64(time.Now().UnixNano()), "")
	flag.Parse()
	fmt.Printf("fleet of %d against %s, seed %d\n", *skids, *kind, *seed)
	if err := run(*kind, *nats, *skids, *every, *length, *kills, rand.New(rand.NewPCG(*seed, 3))); err != nil {
		fmt.Println("FAILED:", err)
		os.Exit(1)
	}
	fmt.Println("every transition of every skid came, once in effect")
}

func run(kind, nats string, n int, every, length time.Duration, kills int, rng *rand.Rand) (err error) {
	dir, err := os.MkdirTemp("", "lapwing-fleet")
	if err != nil {
		return err
	}
	defer os.RemoveAll(dir)
	var nodes []*node
	if kind == "nats" {
		nodes, err = natsCluster(dir, nats)
	} else {
		nodes, err = mosquitto(dir)
	}
	if err != nil {
		return err
	}
	defer func() {
		for _, x := range nodes {
			x.kill()
		}
	}()
	for _, x := range nodes {
		if err := x.start(); err != nil {
			return err
		}
	}
	for _, x := range nodes {
		if err := x.ready(time.Minute); err != nil {
			return err
		}
	}
	door, err := openDoor(nodes)
	if err != nil {
		return err
	}
	defer door.close()
	began := time.Now()
	since := func() string { return fmt.Sprintf("%5.1f s", time.Since(began).Seconds()) }

	sub := newSubscriber("tcp://"+door.addr(), n)
	ctx, stop := context.WithCancel(context.Background())
	defer func() { stop(); <-sub.done }()
	go sub.run(ctx)
	if err := within(time.Minute, "the subscriber is in", sub.in); err != nil {
		return err
	}
	f, err := newFleet(n, "tcp://"+door.addr())
	if err != nil {
		return err
	}
	defer f.stop()
	f.connect(ctx)
	if err := within(2*time.Minute, "all skids are connected", func() bool { return f.connected() == n }); err != nil {
		return fmt.Errorf("%w: %d are", err, f.connected())
	}
	fmt.Printf("%s  all %d connected\n", since(), n)

	made := make(chan struct{})
	go func() { defer close(made); f.make(every, length) }()
	for k := range kills {
		select {
		case <-made:
		case <-time.After(length / time.Duration(kills+1)):
		}
		x := nodes[rng.IntN(len(nodes))]
		if len(nodes) == 1 {
			// A broker alone acknowledges before it has written: what it holds for a subscriber that is away can be lost with it.
			if err := within(time.Minute, "the subscriber is in", sub.in); err != nil {
				return err
			}
		}
		x.kill()
		away := time.Duration(500+rng.IntN(4000)) * time.Millisecond
		time.Sleep(away)
		if err := x.start(); err != nil {
			return err
		}
		if err := x.ready(time.Minute); err != nil {
			return err
		}
		fmt.Printf("%s  %s killed, back after %.1f s (time %d of %d); %d of %d connected\n", since(), x.name, away.Seconds(), k+1, kills, f.connected(), n)
	}
	<-made
	rss := 0
	for _, x := range nodes {
		rss += x.memory()
	}
	if err := within(2*time.Minute, "every outbox is empty", func() bool { return f.waiting() == 0 }); err != nil {
		return fmt.Errorf("%w: %d messages wait", err, f.waiting())
	}
	fmt.Printf("%s  every outbox is empty\n", since())
	total := f.total()
	if err := within(time.Minute, "the subscriber has all", func() bool { return sub.first() >= total }); err != nil {
		fmt.Println(err, sub.first(), "of", total)
	}
	lat := sub.latencies()
	slices.Sort(lat)
	q := func(p float64) time.Duration {
		if len(lat) == 0 {
			return 0
		}
		return lat[int(p*float64(len(lat)-1))].Round(100 * time.Microsecond)
	}
	fmt.Printf("%d transitions, %d repeats dropped; %d connections of skids, %d of the subscriber; delay p50 %s p90 %s p99 %s largest %s; brokers' memory %d MB\n",
		total, sub.repeats(), f.connections(), sub.connections(), q(0.5), q(0.9), q(0.99), q(1), rss)
	if err := sub.verdict(f, len(nodes) == 1); err != nil {
		return err
	}
	// A node that dies can take a retained message with it, or the word that one is gone. Daemons renew them with every
	// connection, on demand, and every quarter of an hour; this is the demand.
	for try := range 7 {
		bad, err := late("tcp://"+door.addr(), f)
		if err != nil || bad == 0 {
			return err
		}
		if try == 6 && len(nodes) == 1 {
			return errors.New("standing alarms are wrong after they were renewed")
		}
		f.renew()
		time.Sleep(5 * time.Second)
	}
	fmt.Println("FALLS SHORT: this cluster's retained messages stay wrong for more than half a minute after its nodes died")
	return nil
}

func within(limit time.Duration, what string, ok func() bool) error {
	for end := time.Now().Add(limit); !ok(); time.Sleep(20 * time.Millisecond) {
		if time.Now().After(end) {
			return fmt.Errorf("waited %s in vain: %s", limit, what)
		}
	}
	return nil
}
