package uplink

import (
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/url"
	"os"
	"strings"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

// Config of a publisher or a listener. User, password and keys are files: secrets are never in the skid file, never in
// the address and never logged. The files are read again for every connection, so a renewed one is taken up. A name that
// begins with $CREDENTIALS_DIRECTORY/ is looked for where systemd puts credentials.
type Config struct {
	Broker                    string // tcp://host:1883, tls://host:8883
	ClientID                  string // unique at the broker: two clients with one id push each other out for ever
	Topics                    Topics // publisher only
	UserFile, PasswordFile    string
	CAFile, CertFile, KeyFile string
	// Offline gives the last will and the message of a clean stop.
	Offline func() []byte
	// Standing gives the retained standing-alarm messages, empty ones for points that do not stand, renewed once after each
	// connect because the broker may have forgotten what it was told. It must be as new as what has been put in the outbox,
	// or a little older, never newer.
	Standing func() []Message
	// RetryMin and RetryMax bound the pause between attempts; zero: 1 s and 60 s (a listener: 2 s and 30 s).
	RetryMin, RetryMax time.Duration
	Log                *slog.Logger
	Commands           *Commands  // publisher only; nil: nobody gives orders over MQTT
	Sparkplug          *Sparkplug // publisher only; nil: the JSON dialect

	wait limits
	pace pace
}

// limits are the times after which a connection is given up; tests shorten them.
type limits struct {
	keepAlive, ping, connect, write time.Duration
	ack                             time.Duration // without an acknowledgement
	drain                           time.Duration // for the outbox at a clean stop
	renew                           time.Duration // of health and standing alarms while a connection lasts
	birth                           time.Duration // between two births of one connection
}

func (l *limits) fill() {
	for _, f := range []struct {
		to  *time.Duration
		def time.Duration
	}{{&l.keepAlive, 30 * time.Second}, {&l.ping, 10 * time.Second}, {&l.connect, 10 * time.Second}, {&l.write, 5 * time.Second},
		{&l.ack, 20 * time.Second}, {&l.drain, 2 * time.Second}, {&l.birth, time.Second}, {&l.renew, 15 * time.Minute}} {
		if *f.to <= 0 {
			*f.to = f.def
		}
	}
}

// check refuses what can never work, and fills in what was left open. Its errors never show the address as it was
// written: it may hold a password.
func (c *Config) check(retryMin, retryMax time.Duration) error {
	if c.Broker == "" {
		return errors.New("uplink: no broker address: write tcp://host:1883 or tls://host:8883")
	}
	u, err := url.Parse(c.Broker)
	if err != nil || u.Host == "" {
		return errors.New("uplink: the broker address cannot be read: write tcp://host:1883 or tls://host:8883")
	}
	if u.User != nil {
		return errors.New("uplink: the broker address holds a user or password: name a user file and a password file instead")
	}
	switch u.Scheme {
	case "tcp", "mqtt", "tls", "ssl", "mqtts":
	default:
		return fmt.Errorf("uplink: broker %s: scheme %q is not one of tcp, tls", c.Broker, u.Scheme)
	}
	if u.Hostname() == "" || u.Port() == "" {
		return fmt.Errorf("uplink: broker %s: write host and port, e.g. tcp://host:1883 or tls://host:8883", c.Broker)
	}
	if c.ClientID == "" {
		return errors.New("uplink: no client id")
	}
	if c.PasswordFile != "" && c.UserFile == "" {
		return errors.New("uplink: a password file without a user file: MQTT has no password without a user")
	}
	if (c.CertFile == "") != (c.KeyFile == "") {
		return errors.New("uplink: a client certificate needs both its certificate file and its key file")
	}
	if c.Log == nil {
		c.Log = slog.New(slog.DiscardHandler)
	}
	if c.RetryMin <= 0 {
		c.RetryMin = retryMin
	}
	if c.RetryMax <= 0 {
		c.RetryMax = retryMax
	}
	c.RetryMax = max(c.RetryMin, c.RetryMax)
	c.wait.fill()
	c.pace.fill()
	return nil
}

// unencrypted says whether a password would cross a network in the clear.
func (c *Config) unencrypted() bool { return c.PasswordFile != "" && c.clear() }

// clear says whether what is sent and received can be read and forged on the way.
func (c *Config) clear() bool {
	u, err := url.Parse(c.Broker)
	if err != nil || (u.Scheme != "tcp" && u.Scheme != "mqtt") {
		return false
	}
	ip := net.ParseIP(u.Hostname())
	return u.Hostname() != "localhost" && (ip == nil || !ip.IsLoopback())
}

// options of one connection: a client is used once, because one that reconnects by itself completes tokens that no
// broker has acknowledged.
func (c *Config) options() (*mqtt.ClientOptions, error) {
	o := mqtt.NewClientOptions().AddBroker(c.Broker).SetClientID(c.ClientID).
		SetProtocolVersion(4). // or a refusal is tried again as MQTT 3.1
		SetCleanSession(true).SetAutoReconnect(false).SetConnectRetry(false).SetOrderMatters(false).
		SetKeepAlive(c.wait.keepAlive).SetPingTimeout(c.wait.ping).
		SetConnectTimeout(c.wait.connect).SetWriteTimeout(c.wait.write) // or a half-open link blocks the writer; it also bounds a Publish that meets a loss half way
	for _, s := range []struct {
		what, file string
		set        func(string) *mqtt.ClientOptions
	}{{"user", c.UserFile, o.SetUsername}, {"password", c.PasswordFile, o.SetPassword}} {
		if s.file == "" {
			continue
		}
		file, err := place(s.file)
		if err != nil {
			return nil, fmt.Errorf("uplink: %s file: %w", s.what, err)
		}
		secret, err := readSecret(file)
		if err != nil {
			return nil, fmt.Errorf("uplink: %s file: %w", s.what, err)
		}
		s.set(secret)
	}
	t, err := c.tls()
	if err != nil {
		return nil, err
	}
	o.SetTLSConfig(t)
	return o, nil
}

const maxSecret = 65535 // bytes; what MQTT 3.1.1 allows a user or password (section 1.5.3)

// readSecret reads one line of text. Errors name the file, never what is in it.
func readSecret(file string) (string, error) {
	f, err := os.Open(file)
	if err != nil {
		return "", err
	}
	defer f.Close()
	b, err := io.ReadAll(io.LimitReader(f, maxSecret+1))
	if err != nil {
		return "", err
	}
	s := strings.TrimRight(string(b), "\r\n")
	switch {
	case s == "":
		return "", fmt.Errorf("%s is empty", file)
	case len(b) > maxSecret:
		return "", fmt.Errorf("%s is longer than %d bytes", file, maxSecret)
	case strings.ContainsAny(s, "\r\n"):
		return "", fmt.Errorf("%s has more than one line", file)
	}
	return s, nil
}

func (c *Config) tls() (*tls.Config, error) {
	t := &tls.Config{MinVersion: tls.VersionTLS12}
	if u, err := url.Parse(c.Broker); err == nil {
		t.ServerName = u.Hostname() // behind a proxy the library would leave it out
	}
	ca, err := place(c.CAFile)
	if err != nil {
		return nil, fmt.Errorf("uplink: CA: %w", err)
	}
	if ca != "" {
		pem, err := os.ReadFile(ca)
		if err != nil {
			return nil, fmt.Errorf("uplink: CA: %w", err)
		}
		t.RootCAs = x509.NewCertPool()
		if !t.RootCAs.AppendCertsFromPEM(pem) {
			return nil, fmt.Errorf("uplink: CA %s holds no certificate", c.CAFile)
		}
	}
	if c.CertFile != "" {
		certFile, err1 := place(c.CertFile)
		keyFile, err2 := place(c.KeyFile)
		if err := errors.Join(err1, err2); err != nil {
			return nil, fmt.Errorf("uplink: client certificate: %w", err)
		}
		cert, err := tls.LoadX509KeyPair(certFile, keyFile)
		if err != nil {
			return nil, fmt.Errorf("uplink: client certificate: %w", err)
		}
		t.Certificates = []tls.Certificate{cert}
	}
	return t, nil
}
