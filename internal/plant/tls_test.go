package plant

import (
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/pem"
	"fmt"
	"log/slog"
	"math/big"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapwing/internal/skid"
)

// authority signs certificates for a test.
type authority struct {
	dir  string
	cert *x509.Certificate
	key  *ecdsa.PrivateKey
	file string
}

func newAuthority(t *testing.T, name string) *authority {
	t.Helper()
	a := &authority{dir: t.TempDir()}
	a.cert = &x509.Certificate{SerialNumber: big.NewInt(1), Subject: pkix.Name{CommonName: name}, NotBefore: time.Now().Add(-time.Hour), NotAfter: time.Now().Add(time.Hour),
		IsCA: true, BasicConstraintsValid: true, KeyUsage: x509.KeyUsageCertSign}
	a.file, _, a.key = a.write(t, name, a.cert, nil)
	return a
}

func (a *authority) sign(t *testing.T, name string, until time.Duration) (cert, key string) {
	t.Helper()
	cert, key, _ = a.write(t, name, &x509.Certificate{SerialNumber: big.NewInt(time.Now().UnixNano()), Subject: pkix.Name{CommonName: name}, NotBefore: time.Now().Add(-2 * time.Hour), NotAfter: time.Now().Add(until),
		IPAddresses: []net.IP{net.IPv4(127, 0, 0, 1)}, ExtKeyUsage: []x509.ExtKeyUsage{x509.ExtKeyUsageClientAuth, x509.ExtKeyUsageServerAuth}}, a)
	return cert, key
}

func (a *authority) write(t *testing.T, name string, c *x509.Certificate, by *authority) (cert, key string, k *ecdsa.PrivateKey) {
	t.Helper()
	k, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	parent, signer := c, k
	if by != nil {
		parent, signer = by.cert, by.key
	}
	raw, err := x509.CreateCertificate(rand.Reader, c, parent, &k.PublicKey, signer)
	if err != nil {
		t.Fatal(err)
	}
	der, err := x509.MarshalECPrivateKey(k)
	if err != nil {
		t.Fatal(err)
	}
	cert, key = filepath.Join(a.dir, name+".pem"), filepath.Join(a.dir, name+".key")
	for path, b := range map[string]*pem.Block{cert: {Type: "CERTIFICATE", Bytes: raw}, key: {Type: "EC PRIVATE KEY", Bytes: der}} {
		if err := os.WriteFile(path, pem.EncodeToMemory(b), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	return cert, key, k
}

// The register map behind TLS is read by those whose certificate is signed and in date, and by nobody else; the poller's
// library is the client, which shows that both ends of it fit.
func TestRegistersBehindTLS(t *testing.T) {
	t.Parallel()
	ours, theirs := newAuthority(t, "ours"), newAuthority(t, "theirs")
	var said lines
	cert, key := ours.sign(t, "server", time.Hour)
	s := serving(t, nil, slog.New(slog.NewTextHandler(&said, nil)), func(m *skid.ModbusServer) { m.CertFile, m.KeyFile, m.CAFile = cert, key, ours.file })
	for name, c := range map[string]struct {
		by    *authority
		until time.Duration
		trust *authority
		good  bool
		says  string
	}{
		"good":                           {ours, time.Hour, ours, true, ""},
		"signed by somebody else":        {theirs, time.Hour, ours, false, "remote error: tls: "},
		"out of date":                    {ours, -time.Hour, ours, false, "remote error: tls: "},
		"the server is not who it seems": {ours, time.Hour, theirs, false, "certificate signed by unknown authority"},
	} {
		t.Run(name, func(t *testing.T) {
			cert, key := c.by.sign(t, "client", c.until)
			more := fmt.Sprintf("      cert_file: %s\n      key_file: %s\n      ca_file: %s\n", cert, key, c.trust.file)
			sk := withModbus(t, strings.Replace(one("tcp+tls://"+s.Addr(), more, "{value: load_step, function: 4, address: 6, max_age_s: 20}"), "timeout_ms: 60", "timeout_ms: 10000", 1))
			p := polling(t, sk)
			if c.good { // register 6 of our own map is the mode: 2, judging
				until(t, "the value is there", func() bool { return now(t, p).Step == 2 })
				return
			}
			until(t, "it is refused", func() bool {
				said := strings.Join(p.Troubles(time.Now()), "")
				return said != "" && !strings.Contains(said, "not read yet")
			})
			if now(t, p).Step == 2 {
				t.Error("let in")
			}
			if got := strings.Join(p.Troubles(time.Now()), ""); !strings.Contains(got, c.says) {
				t.Errorf("%q", got)
			}
		})
	}
	if c, err := tls.Dial("tcp", s.Addr(), &tls.Config{InsecureSkipVerify: true}); err == nil { // no certificate: TLS 1.3 says so with the first read
		_ = c.SetDeadline(time.Now().Add(10 * time.Second))
		if _, err := c.Read(make([]byte, 1)); err == nil {
			t.Error("let in without a certificate")
		}
		c.Close()
	}
	until(t, "the log says why", func() bool { return strings.Contains(said.String(), "Modbus connection refused: TLS") })
}

func TestCertificatesThatCannotBeUsed(t *testing.T) {
	a := newAuthority(t, "ours")
	cert, key := a.sign(t, "x", time.Hour)
	none := filepath.Join(t.TempDir(), "none.pem")
	empty := filepath.Join(t.TempDir(), "empty.pem")
	if err := os.WriteFile(empty, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	for name, c := range map[string][4]string{"no file": {none, key, a.file, "none.pem"}, "no key": {cert, cert, a.file, "client certificate of plc"}, "no CA": {cert, key, none, "none.pem"}, "an empty CA": {cert, key, empty, "holds no certificate"}} {
		more := fmt.Sprintf("      cert_file: %s\n      key_file: %s\n      ca_file: %s\n", c[0], c[1], c[2])
		if _, err := NewPoller(withModbus(t, one("tcp+tls://127.0.0.1:1", more, tagPs)), quietLog()); err == nil || !strings.Contains(err.Error(), c[3]) {
			t.Errorf("%s: %v", name, err)
		}
		sk := withModbus(t, fmt.Sprintf("  server: {listen: '127.0.0.1:0', cert_file: %s, key_file: %s, ca_file: %s}\n", c[0], c[1], c[2]))
		if s, err := OpenServer(sk, NewMap(sk), nil, quietLog()); err == nil {
			_ = s.Close()
			t.Errorf("%s: a server opens", name)
		}
	}
}
