package main

import (
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/json"
	"encoding/pem"
	"io"
	"math/big"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"
)

// authority signs certificates for a test.
type authority struct {
	dir  string
	cert *x509.Certificate
	key  *ecdsa.PrivateKey
}

func newAuthority(t *testing.T) *authority {
	t.Helper()
	a := &authority{dir: t.TempDir()}
	a.sign(t, "ca", &x509.Certificate{IsCA: true, BasicConstraintsValid: true, KeyUsage: x509.KeyUsageCertSign})
	return a
}

func (a *authority) file(name string) string { return filepath.Join(a.dir, name) }

// sign completes a template and writes name.crt and name.key; the first one signs itself and is the authority.
func (a *authority) sign(t *testing.T, name string, c *x509.Certificate) {
	t.Helper()
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	c.SerialNumber, c.Subject = big.NewInt(time.Now().UnixNano()), pkix.Name{CommonName: name}
	if c.NotBefore.IsZero() {
		c.NotBefore, c.NotAfter = time.Now().Add(-time.Hour), time.Now().Add(100*24*time.Hour)
	}
	parent, by := a.cert, a.key
	if parent == nil {
		parent, by = c, key
	}
	raw, err := x509.CreateCertificate(rand.Reader, c, parent, &key.PublicKey, by)
	if err != nil {
		t.Fatal(err)
	}
	if a.cert == nil {
		a.key = key
		if a.cert, err = x509.ParseCertificate(raw); err != nil {
			t.Fatal(err)
		}
	}
	k, err := x509.MarshalECPrivateKey(key)
	if err != nil {
		t.Fatal(err)
	}
	for ext, b := range map[string]*pem.Block{".crt": {Type: "CERTIFICATE", Bytes: raw}, ".key": {Type: "EC PRIVATE KEY", Bytes: k}} {
		if err := os.WriteFile(a.file(name+ext), pem.EncodeToMemory(b), 0o600); err != nil {
			t.Fatal(err)
		}
	}
}

// serverCert is a template for a broker on loopback.
func serverCert() *x509.Certificate {
	return &x509.Certificate{IPAddresses: []net.IP{net.IPv4(127, 0, 0, 1)}}
}

func clientCert() *x509.Certificate {
	return &x509.Certificate{ExtKeyUsage: []x509.ExtKeyUsage{x509.ExtKeyUsageClientAuth}}
}

func agedCert(c *x509.Certificate) *x509.Certificate {
	c.NotBefore, c.NotAfter = time.Now().Add(-48*time.Hour), time.Now().Add(-24*time.Hour)
	return c
}

const password = "s3cret-Hunt"

// startSecured runs mosquitto with the example files of configs/mosquitto, on loopback with a port of the test's own. The
// users of the access list all have the same password. cert is the broker's certificate.
func startSecured(t *testing.T, a *authority, cert string) *broker {
	t.Helper()
	dir := t.TempDir()
	b := &broker{t: t, port: freePort(t), conf: filepath.Join(dir, "mosquitto.conf")}
	raw, err := os.ReadFile(filepath.Join(root(t), "configs", "mosquitto", "lapwing.conf"))
	if err != nil {
		t.Fatal(err)
	}
	conf := string(raw)
	passwords := filepath.Join(dir, "passwords")
	for i, user := range []string{"quillmere-c1", "control-room", "desk", "historian", "stranger"} {
		args := []string{"-b", passwords, user, password}
		if i == 0 {
			args = append([]string{"-c"}, args...)
		}
		if out, errs, code := ran(t, tool(t, "mosquitto_passwd"), args...); code != 0 {
			t.Fatalf("mosquitto_passwd: exit %d\n%s%s", code, out, errs)
		}
	}
	for _, r := range [][2]string{
		{"listener 8883", "listener " + strconv.Itoa(b.port) + " 127.0.0.1"},
		{"/etc/mosquitto/lapwing/ca.crt", a.file("ca.crt")}, {"/etc/mosquitto/lapwing/broker.crt", a.file(cert + ".crt")}, {"/etc/mosquitto/lapwing/broker.key", a.file(cert + ".key")},
		{"/etc/mosquitto/lapwing/passwords", passwords}, {"/etc/mosquitto/lapwing/lapwing.acl", filepath.Join(root(t), "configs", "mosquitto", "lapwing.acl")},
		{"/var/lib/mosquitto/", dir + "/"},
	} {
		if strings.Count(conf, r[0]) != 1 {
			t.Fatalf("the example broker file has %d times %s", strings.Count(conf, r[0]), r[0])
		}
		conf = strings.Replace(conf, r[0], r[1], 1)
	}
	conf += "log_dest stderr\nlog_type all\n"
	if os.Getuid() == 0 {
		conf += "user root\n"
	}
	if err := os.WriteFile(b.conf, []byte(conf), 0o644); err != nil {
		t.Fatal(err)
	}
	b.start()
	return b
}

// as are the arguments of a mosquitto client with a user's password and a certificate.
func (b *broker) as(a *authority, user, cert string) []string {
	return []string{"-h", "127.0.0.1", "-p", strconv.Itoa(b.port), "-u", user, "-P", password, "-q", "1",
		"--cafile", a.file("ca.crt"), "--cert", a.file(cert + ".crt"), "--key", a.file(cert + ".key")}
}

// uplinkKeys are the lines of a skid file for a secured broker.
func uplinkKeys(extra ...string) string {
	return "lapwing\n  " + strings.Join(extra, "\n  ")
}

func secretFile(t *testing.T, dir, name, text string) string {
	t.Helper()
	f := filepath.Join(dir, name)
	if err := os.WriteFile(f, []byte(text+"\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	return f
}

// askPage reads JSON from a daemon's page.
func askPage(t *testing.T, url string, into any) {
	t.Helper()
	r, err := http.Get(url)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Body.Close()
	b, err := io.ReadAll(r.Body)
	if err != nil || r.StatusCode != 200 {
		t.Fatalf("%s: %s, %v: %s", url, r.Status, err, b)
	}
	if err := json.Unmarshal(b, into); err != nil {
		t.Fatalf("%s: %v: %s", url, err, b)
	}
}

// present is the part of the daemon's snapshot that these tests look at.
type present struct {
	Health struct {
		Trouble []string `json:"trouble"`
		Uplink  struct {
			Connected bool      `json:"connected"`
			LastError string    `json:"last_error"`
			CertUntil time.Time `json:"cert_until"`
			Commands  *struct {
				Hearing  bool   `json:"hearing"`
				Accepted uint64 `json:"accepted"`
				Refused  uint64 `json:"refused"`
			} `json:"commands"`
		} `json:"uplink"`
	} `json:"health"`
}
