package main

import (
	"crypto/x509"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// TestSystemTLS: the daemon against a mosquitto with the example files. With everything right it connects; with anything
// wrong it says what in its log and on its page, goes on watching, and lets no secret out.
func TestSystemTLS(t *testing.T) {
	system(t)
	a, other := newAuthority(t), newAuthority(t)
	a.sign(t, "broker", serverCert())
	a.sign(t, "aged", agedCert(serverCert()))
	a.sign(t, "elsewhere", &x509.Certificate{DNSNames: []string{"broker.site.example"}})
	a.sign(t, "skid", clientCert())
	a.sign(t, "agedskid", agedCert(clientCert()))
	other.sign(t, "skid", clientCert())
	good, agedBroker, elsewhere := startSecured(t, a, "broker"), startSecured(t, a, "aged"), startSecured(t, a, "elsewhere")
	for _, c := range []struct {
		name     string
		b        *broker
		ca       *authority
		cert     string // file without its ending; empty: none
		password string
		want     string // in the log and on the page; empty: it connects
	}{
		{"all right", good, a, a.file("skid"), password, ""},
		{"another authority's broker", good, other, a.file("skid"), password, "not signed by an authority of ca_file"},
		{"the broker's certificate has expired", agedBroker, a, a.file("skid"), password, "has expired or is not valid yet"},
		{"the broker's certificate is another host's", elsewhere, a, a.file("skid"), password, "for another name"},
		{"a stranger's client certificate", good, a, other.file("skid"), password, "does not take the client certificate"},
		{"an expired client certificate", good, a, a.file("agedskid"), password, "the client certificate (cert_file) has expired"},
		{"no client certificate", good, a, "", password, "does not take the client certificate"},
		{"a wrong password", good, a, a.file("skid"), password + "x", "refuses user or password"},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			creds := t.TempDir()
			secretFile(t, creds, "mqtt-user", "quillmere-c1")
			secretFile(t, creds, "mqtt-password", c.password)
			keys := []string{"user_file: $$CREDENTIALS_DIRECTORY/mqtt-user", "password_file: $$CREDENTIALS_DIRECTORY/mqtt-password", "ca_file: " + c.ca.file("ca.crt")}
			if c.cert != "" {
				key, err := os.ReadFile(c.cert + ".key")
				if err != nil {
					t.Fatal(err)
				}
				secretFile(t, creds, "mqtt-key", string(key))
				keys = append(keys, "cert_file: "+c.cert+".crt", "key_file: $$CREDENTIALS_DIRECTORY/mqtt-key")
			}
			skid := skidFile(t, dir, "broker", "tls://"+address(c.b.port), "root", uplinkKeys(keys...), "max_gb", "0.2")
			d := start(t, []string{"CREDENTIALS_DIRECTORY=" + creds}, built(t, "lapwingd"), "--skid", skid, "--state", filepath.Join(dir, "state"), "--source", "model:swings", "--listen", "127.0.0.1:0")
			page := pageOf(t, d)
			var now present
			if c.want == "" {
				d.until(20*time.Second, "connected, on the page", func() bool { askPage(t, page+"api/v1/now", &now); return now.Health.Uplink.Connected })
				if left := time.Until(now.Health.Uplink.CertUntil); left < 99*24*time.Hour || left > 100*24*time.Hour {
					t.Errorf("certificate until %s", now.Health.Uplink.CertUntil)
				}
				read := start(t, nil, tool(t, "mosquitto_sub"), append(c.b.as(a, "control-room", "skid"), "-t", "lapwing/quillmere-c1/health", "-C", "1", "-W", "20")...)
				if code := read.end(30 * time.Second); code != 0 || !strings.Contains(read.out.String(), `"skid":"quillmere-c1"`) {
					t.Errorf("the control room reads %q, exit %d", read.out.String(), code)
				}
			} else {
				d.until(30*time.Second, "the log says why", func() bool { return strings.Contains(d.err.String(), c.want) })
				d.until(20*time.Second, "the page says why", func() bool {
					askPage(t, page+"api/v1/now", &now)
					return strings.Contains(strings.Join(now.Health.Trouble, "\n"), c.want) && strings.Contains(now.Health.Uplink.LastError, c.want)
				})
				if now.Health.Uplink.Connected {
					t.Error("it says that it is connected")
				}
			}
			if code := d.terminate(20 * time.Second); code != 0 {
				t.Errorf("exit %d", code)
			}
			if strings.Contains(d.err.String(), password) {
				t.Errorf("the log holds the password:\n%s", d.err.String())
			}
		})
	}
}
