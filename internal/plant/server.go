package plant

import (
	"context"
	"crypto/tls"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/netip"
	"sync"
	"sync/atomic"
	"time"

	"lapwing/internal/skid"
	"lapwing/internal/wire"
)

// Server answers Modbus TCP requests out of the newest image. It speaks the protocol itself: the library of the poller
// closes the connection where the standard wants exception 03, takes an address and no listener, so that nobody could be
// turned away in front of it, and dies with a handler that panics.
type Server struct {
	m     *Map
	conf  skid.ModbusServer
	allow []netip.Prefix
	tls   *tls.Config
	ln    net.Listener
	log   *slog.Logger
	ack   Acknowledger
	image atomic.Pointer[image]
	beat  uint16 // of whoever calls Show

	mu     sync.Mutex
	conns  map[net.Conn]netip.Addr
	closed bool
	all    sync.WaitGroup
	said   map[string]time.Time
}

// Acknowledger acknowledges alarm points in somebody's name. An error means that it was not done.
type Acknowledger func(ctx context.Context, keys []string, by string) error

const (
	ackPatience   = 3 * time.Second  // for the answer to an acknowledgement
	framePatience = 5 * time.Second  // for the rest of a frame that has begun, and for an answer to be taken
	saidEvery     = 10 * time.Minute // how often the same refusal is logged again
)

// OpenServer listens. Requests are answered once Serve runs; before the first Show there is nothing to read (exception 06).
func OpenServer(sk *skid.Skid, m *Map, ack Acknowledger, log *slog.Logger) (*Server, error) {
	s := &Server{m: m, conf: sk.Modbus.Server, log: log, ack: ack, conns: map[net.Conn]netip.Addr{}, said: map[string]time.Time{}}
	for _, a := range s.conf.Allow {
		p, err := netip.ParsePrefix(a)
		if err != nil {
			return nil, fmt.Errorf("plant: allow %q: %w", a, err)
		}
		s.allow = append(s.allow, p)
	}
	if s.conf.CertFile != "" {
		cert, err := tls.LoadX509KeyPair(s.conf.CertFile, s.conf.KeyFile)
		if err != nil {
			return nil, fmt.Errorf("plant: certificate of the Modbus server: %w", err)
		}
		s.tls = &tls.Config{MinVersion: tls.VersionTLS12, Certificates: []tls.Certificate{cert}}
		if s.conf.CAFile != "" {
			if s.tls.ClientCAs, err = certPool(s.conf.CAFile); err != nil {
				return nil, err
			}
			s.tls.ClientAuth = tls.RequireAndVerifyClientCert
		}
	}
	ln, err := net.Listen("tcp", s.conf.Listen)
	if err != nil {
		return nil, fmt.Errorf("plant: Modbus server: %w", err)
	}
	s.ln = ln
	return s, nil
}

// Addr is where the server listens.
func (s *Server) Addr() string { return s.ln.Addr().String() }

// Show puts a new image in place. One goroutine calls it.
func (s *Server) Show(n *wire.Now, points []wire.Point, flood bool) {
	s.beat++
	s.image.Store(s.m.draw(n, points, flood, s.beat, s.conf.Acknowledge))
}

// Serve answers until Close.
func (s *Server) Serve() error {
	defer s.all.Wait()
	for {
		c, err := s.ln.Accept()
		if errors.Is(err, net.ErrClosed) {
			return nil
		}
		if err != nil { // out of descriptors, most likely: others give some back in a moment
			s.refuse("accept", "Modbus server", "err", err)
			time.Sleep(100 * time.Millisecond)
			continue
		}
		if !s.admit(c) {
			_ = c.Close()
			continue
		}
		s.all.Go(func() { s.handle(c) })
	}
}

// Close ends every connection.
func (s *Server) Close() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return nil
	}
	s.closed = true
	for c := range s.conns {
		_ = c.Close()
	}
	return s.ln.Close()
}

// admit looks at who connects, and counts.
func (s *Server) admit(c net.Conn) bool {
	from := addrOf(c)
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return false
	}
	allowed := len(s.allow) == 0
	for _, p := range s.allow {
		allowed = allowed || p.Contains(from)
	}
	same := 0
	for _, a := range s.conns {
		if a == from {
			same++
		}
	}
	switch {
	case !allowed:
		s.refuseLocked("allow"+from.String(), "Modbus connection refused: not on the list", "from", from)
		return false
	case same >= s.conf.PerAddress:
		s.refuseLocked("many"+from.String(), "Modbus connection refused: too many from one address", "from", from, "most", s.conf.PerAddress)
		return false
	case len(s.conns) >= s.conf.Clients:
		s.refuseLocked("full", "Modbus connection refused: too many in all", "from", from, "most", s.conf.Clients)
		return false
	}
	s.conns[c] = from
	return true
}

func addrOf(c net.Conn) netip.Addr {
	p, err := netip.ParseAddrPort(c.RemoteAddr().String())
	if err != nil {
		return netip.Addr{}
	}
	return p.Addr().Unmap()
}

func (s *Server) refuse(what, msg string, args ...any) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.refuseLocked(what, msg, args...)
}

// refuseLocked logs the first of each kind, and again after a while.
func (s *Server) refuseLocked(what, msg string, args ...any) {
	if t, ok := s.said[what]; ok && time.Since(t) < saidEvery {
		return
	}
	if len(s.said) > 1000 {
		clear(s.said)
	}
	s.said[what] = time.Now()
	s.log.Warn(msg, args...)
}

func (s *Server) handle(c net.Conn) {
	raw := c
	defer func() {
		if x := recover(); x != nil {
			s.refuse("panic", "Modbus server: a request could not be answered", "err", fmt.Sprint(x))
		}
		_ = raw.Close()
		s.mu.Lock()
		delete(s.conns, raw)
		s.mu.Unlock()
	}()
	by := "modbus " + addrOf(c).String()
	if s.tls != nil {
		t := tls.Server(c, s.tls)
		_ = c.SetDeadline(time.Now().Add(2 * framePatience))
		if err := t.Handshake(); err != nil {
			s.refuse("tls"+addrOf(c).String(), "Modbus connection refused: TLS", "from", addrOf(c), "err", err)
			return
		}
		if p := t.ConnectionState().PeerCertificates; len(p) > 0 {
			by += " " + p[0].Subject.CommonName
		}
		c = t
	}
	var in, out [260]byte // the longest frame: Modbus messaging on TCP/IP V1.0b, 3.1
	for {
		_ = c.SetDeadline(time.Now().Add(s.conf.Idle))
		if _, err := io.ReadFull(c, in[:1]); err != nil {
			return
		}
		_ = c.SetDeadline(time.Now().Add(framePatience))
		if _, err := io.ReadFull(c, in[1:7]); err != nil {
			return
		}
		n := int(binary.BigEndian.Uint16(in[4:]))
		if in[2] != 0 || in[3] != 0 || n < 2 || n > 254 {
			return // no Modbus: where the next frame begins cannot be known
		}
		if _, err := io.ReadFull(c, in[7:6+n]); err != nil {
			return
		}
		pdu := s.answer(out[7:7], in[6], in[7:6+n], by)
		copy(out[:], in[:7])
		binary.BigEndian.PutUint16(out[4:], uint16(1+len(pdu)))
		_ = c.SetDeadline(time.Now().Add(framePatience))
		if _, err := c.Write(out[:7+len(pdu)]); err != nil {
			return
		}
	}
}

// Exception codes: Modbus application protocol V1.1b3, 7.
const (
	badFunction = 0x01
	badAddress  = 0x02
	badValue    = 0x03
	busy        = 0x06
	noPath      = 0x0A
)

// answer appends the answer to a request, function code first, to out, which has room for 253 bytes.
func (s *Server) answer(out []byte, unit byte, q []byte, by string) []byte {
	no := func(code byte) []byte { return append(out[:0], q[0]|0x80, code) }
	// 0 and 255 stand for the device itself where there is no gateway (Modbus messaging on TCP/IP V1.0b, 4.4.1.2).
	if int(unit) != s.conf.Unit && unit != 0 && unit != 255 {
		return no(noPath)
	}
	im := s.image.Load()
	if im == nil {
		return no(busy)
	}
	switch q[0] {
	case 1, 3, 4, 5:
	default:
		return no(badFunction)
	}
	if len(q) != 5 {
		return no(badValue)
	}
	first, n := int(binary.BigEndian.Uint16(q[1:])), int(binary.BigEndian.Uint16(q[3:]))
	switch q[0] {
	case 1:
		if n < 1 || n > mostBits {
			return no(badValue)
		}
		if first+n > s.m.size {
			return no(badAddress)
		}
		out = append(out, q[0], byte((n+7)/8))
		for i := range n {
			if i%8 == 0 {
				out = append(out, 0)
			}
			if len(im.coils[first+i]) > 0 {
				out[len(out)-1] |= 1 << (i % 8)
			}
		}
		return out
	case 5:
		return s.write(out, im, q, by, no)
	}
	if n < 1 || n > mostRegisters {
		return no(badValue)
	}
	if first+n > s.m.size {
		return no(badAddress)
	}
	out = append(out, q[0], byte(2*n))
	for _, w := range im.words[first : first+n] {
		out = binary.BigEndian.AppendUint16(out, w)
	}
	return out
}

// write is the one thing that can be written: an acknowledge coil, of what the image shows that others have read.
func (s *Server) write(out []byte, im *image, q []byte, by string, no func(byte) []byte) []byte {
	if !s.conf.Acknowledge || s.ack == nil {
		return no(badFunction)
	}
	on := q[3] == 0xFF && q[4] == 0
	if !on && (q[3] != 0 || q[4] != 0) {
		return no(badValue)
	}
	keys, ok := im.coils[int(binary.BigEndian.Uint16(q[1:]))]
	if !ok {
		return no(badAddress)
	}
	if on && len(keys) > 0 {
		ctx, stop := context.WithTimeout(context.Background(), ackPatience)
		defer stop()
		if err := s.ack(ctx, keys, by); err != nil {
			s.refuse("ack"+err.Error(), "an acknowledgement over Modbus was not carried out", "by", by, "err", err)
			return no(busy)
		}
	}
	return append(out, q...)
}
