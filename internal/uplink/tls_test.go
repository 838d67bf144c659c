package uplink

import (
	"context"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/pem"
	"math/big"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// authority signs certificates for a test.
type authority struct {
	cert *x509.Certificate
	key  *ecdsa.PrivateKey
	file string
}

func newAuthority(t *testing.T) *authority {
	t.Helper()
	a := &authority{}
	cert, key := a.sign(t, &x509.Certificate{IsCA: true, BasicConstraintsValid: true, KeyUsage: x509.KeyUsageCertSign})
	a.file = pemFile(t, "ca.pem", "CERTIFICATE", cert.Raw)
	a.cert, a.key = cert, key
	return a
}

// sign completes a template; an authority without a key signs itself.
func (a *authority) sign(t *testing.T, c *x509.Certificate) (*x509.Certificate, *ecdsa.PrivateKey) {
	t.Helper()
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	c.SerialNumber, c.Subject = big.NewInt(time.Now().UnixNano()), pkix.Name{CommonName: "test"}
	if c.NotBefore.IsZero() {
		c.NotBefore, c.NotAfter = time.Now().Add(-time.Hour), time.Now().Add(time.Hour)
	}
	parent, by := c, key
	if a.key != nil {
		parent, by = a.cert, a.key
	}
	raw, err := x509.CreateCertificate(rand.Reader, c, parent, &key.PublicKey, by)
	if err != nil {
		t.Fatal(err)
	}
	out, err := x509.ParseCertificate(raw)
	if err != nil {
		t.Fatal(err)
	}
	return out, key
}

func pemFile(t *testing.T, name, kind string, raw []byte) string {
	t.Helper()
	f := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(f, pem.EncodeToMemory(&pem.Block{Type: kind, Bytes: raw}), 0o600); err != nil {
		t.Fatal(err)
	}
	return f
}

func TestTLS(t *testing.T) {
	ca, other := newAuthority(t), newAuthority(t)
	here := []net.IP{net.IPv4(127, 0, 0, 1)}
	server := func(a *authority, c *x509.Certificate) *tls.Config {
		cert, key := a.sign(t, c)
		return &tls.Config{Certificates: []tls.Certificate{{Certificate: [][]byte{cert.Raw}, PrivateKey: key}}}
	}
	client := func(a *authority) (cert, key string) {
		c, k := a.sign(t, &x509.Certificate{ExtKeyUsage: []x509.ExtKeyUsage{x509.ExtKeyUsageClientAuth}})
		raw, err := x509.MarshalECPrivateKey(k)
		if err != nil {
			t.Fatal(err)
		}
		return pemFile(t, "c.pem", "CERTIFICATE", c.Raw), pemFile(t, "k.pem", "EC PRIVATE KEY", raw)
	}
	good := server(ca, &x509.Certificate{IPAddresses: here})
	mutual := good.Clone()
	mutual.ClientAuth, mutual.ClientCAs = tls.RequireAndVerifyClientCert, x509.NewCertPool()
	mutual.ClientCAs.AddCert(ca.cert)
	aged := good.Clone()
	aged.MaxVersion = tls.VersionTLS11
	aged.MinVersion = tls.VersionTLS10
	for _, c := range []struct {
		name   string
		server *tls.Config
		client *authority // signs the client's certificate; nil: none is shown
		want   string     // of the error; empty: it connects
	}{
		{"known authority", good, nil, ""},
		{"client certificate wanted and shown", mutual, ca, ""},
		{"client certificate of a stranger", mutual, other, "EOF|certificate|reset"},
		{"client certificate not shown", mutual, nil, "EOF|certificate|reset"},
		{"another authority", server(other, &x509.Certificate{IPAddresses: here}), nil, "unknown authority"},
		{"another host's certificate", server(ca, &x509.Certificate{DNSNames: []string{"broker.example"}}), nil, "127.0.0.1"},
		{"expired", server(ca, &x509.Certificate{IPAddresses: here, NotBefore: time.Now().Add(-48 * time.Hour), NotAfter: time.Now().Add(-24 * time.Hour)}), nil, "expired"},
		{"TLS 1.1", aged, nil, "protocol version"},
	} {
		t.Run(c.name, func(t *testing.T) {
			h := &hostile{tls: c.server}
			cfg := config(openHostile(t, h))
			cfg.CAFile = ca.file
			if c.client != nil {
				cfg.CertFile, cfg.KeyFile = client(c.client)
			}
			ctx, cancel := context.WithCancel(context.Background())
			defer cancel()
			err := Listen(ctx, cfg, "lapwing", func(Received) {}, func(string) { cancel() })
			if c.want == "" {
				if err != nil || h.connected() != 1 {
					t.Errorf("%v, %d connections", err, h.connected())
				}
				return
			}
			found := false
			for _, w := range strings.Split(c.want, "|") {
				found = found || err != nil && strings.Contains(err.Error(), w)
			}
			if !found || h.connected() != 0 {
				t.Errorf("got %v, want %q; the broker saw %d CONNECTs", err, c.want, h.connected())
			}
		})
	}
}
