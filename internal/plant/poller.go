package plant

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"fmt"
	"log"
	"log/slog"
	"os"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"github.com/simonvetter/modbus"

	"lapwing/internal/skid"
)

// Poller reads the process values of a skid file's Modbus devices. One goroutine serves each connection or serial bus;
// whoever wants the values reads the newest of each device without waiting for any of them.
type Poller struct {
	sk      *skid.Skid
	buses   []*bus
	devices []*device
	log     *slog.Logger
}

// device is one unit and what was last read from it.
type device struct {
	*skid.ModbusDevice
	state  atomic.Pointer[state]
	blocks []block
	asked  []time.Time // by block: not to be asked again before; after the device has refused it
	due    time.Time
	fails  int // rounds without a good answer, in a row
	beat   float64
	beatAt time.Time // when the heartbeat was first seen at beat; zero: never seen
	said   string
}

// state is what is known of a device. It is never changed once it is in place.
type state struct {
	tags []reading
	link string // why the newest round gave nothing; empty: it was good
}

// reading is one tag's newest value.
type reading struct {
	v     float64   // SI
	at    time.Time // when it was read; zero: never
	why   string    // why the newest answer is no value; empty: it is one
	since time.Time // when why began
}

// NewPoller prepares the reading; it opens nothing but certificate files.
func NewPoller(sk *skid.Skid, logger *slog.Logger) (*Poller, error) {
	p := &Poller{sk: sk, log: logger}
	byURL := map[string]*bus{}
	for i := range sk.Modbus.Devices {
		d := &device{ModbusDevice: &sk.Modbus.Devices[i]}
		d.blocks = plan(d.ModbusDevice)
		d.asked = make([]time.Time, len(d.blocks))
		d.state.Store(&state{tags: make([]reading, len(d.Tags)), link: "not read yet"})
		p.devices = append(p.devices, d)
		b := byURL[d.URL]
		if b == nil {
			b = &bus{poller: p, serial: strings.HasPrefix(d.URL, "rtu")}
			byURL[d.URL] = b
			p.buses = append(p.buses, b)
		}
		b.devices = append(b.devices, d)
		b.rest = max(b.rest, d.WorstAnswer)
		b.timeout = max(b.timeout, d.Timeout)
	}
	for _, b := range p.buses {
		conf, err := clientConfig(b.devices[0].ModbusDevice, b.timeout, logger)
		if err != nil {
			return nil, err
		}
		b.conf = conf
	}
	return p, nil
}

func clientConfig(d *skid.ModbusDevice, timeout time.Duration, logger *slog.Logger) (*modbus.ClientConfiguration, error) {
	c := &modbus.ClientConfiguration{URL: d.URL, Timeout: timeout, Speed: uint(d.Baud), DataBits: uint(d.DataBits), StopBits: uint(d.StopBits),
		Logger: log.New(quiet{logger}, "", 0)}
	switch d.Parity {
	case "even":
		c.Parity = modbus.PARITY_EVEN
	case "odd":
		c.Parity = modbus.PARITY_ODD
	}
	if d.CertFile == "" {
		return c, nil
	}
	cert, err := tls.LoadX509KeyPair(d.CertFile, d.KeyFile)
	if err != nil {
		return nil, fmt.Errorf("plant: client certificate of %s: %w", d.Name, err)
	}
	c.TLSClientCert = &cert
	c.TLSRootCAs, err = certPool(d.CAFile)
	return c, err
}

func certPool(file string) (*x509.CertPool, error) {
	pem, err := os.ReadFile(file)
	if err != nil {
		return nil, fmt.Errorf("plant: CA: %w", err)
	}
	pool := x509.NewCertPool()
	if !pool.AppendCertsFromPEM(pem) {
		return nil, fmt.Errorf("plant: CA %s holds no certificate", file)
	}
	return pool, nil
}

// quiet takes what the Modbus library would write to standard output.
type quiet struct{ log *slog.Logger }

func (q quiet) Write(b []byte) (int, error) {
	q.log.Debug("modbus", "said", strings.TrimSpace(string(b)))
	return len(b), nil
}

// Run reads until ctx ends and every goroutine has stopped: at most the time-out of one request later.
func (p *Poller) Run(ctx context.Context) {
	var all sync.WaitGroup
	for _, b := range p.buses {
		all.Go(func() { b.run(ctx) })
	}
	all.Wait()
}
