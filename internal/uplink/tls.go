package uplink

import (
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"net"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

// credentials is the folder where systemd puts what LoadCredential names (systemd.exec(5)).
const credentials = "CREDENTIALS_DIRECTORY"

// place gives the path of a secret: as written, or in systemd's folder of credentials when it begins with its name.
func place(file string) (string, error) {
	name, ok := strings.CutPrefix(file, "$"+credentials+"/")
	if !ok {
		return file, nil
	}
	dir := os.Getenv(credentials)
	if dir == "" {
		return "", fmt.Errorf("%s: $%s is not set: the unit needs LoadCredential=%s:…", file, credentials, name)
	}
	return filepath.Join(dir, name), nil
}

// warnReadable warns of secrets that everybody on this computer can read.
func (c *Config) warnReadable() {
	for _, s := range [][2]string{{"password", c.PasswordFile}, {"key", c.KeyFile}} {
		file, err := place(s[1])
		if err != nil || file == "" {
			continue
		}
		if st, err := os.Stat(file); err == nil && st.Mode().Perm()&0o004 != 0 {
			c.Log.Warn("uplink: everybody on this computer can read the "+s[0]+" file", "file", file)
		}
	}
}

// dial opens the connection of one session. Proxy variables have no say in it.
func (c *Config) dial(o mqtt.ClientOptions, u *url.URL, note func(*tls.ConnectionState)) (net.Conn, error) {
	d := o.Dialer
	switch u.Scheme {
	case "tls", "ssl", "mqtts":
	default:
		conn, err := d.Dial("tcp", u.Host)
		if err != nil {
			return nil, err
		}
		return narrowed(conn, maxInbound), nil
	}
	conn, err := tls.DialWithDialer(d, "tcp", u.Host, o.TLSConfig)
	if err != nil {
		return nil, err
	}
	st := conn.ConnectionState()
	note(&st)
	return narrowed(conn, maxInbound), nil
}

// expiry is when the first certificate of this connection's both sides ends.
func expiry(t *tls.Config, st *tls.ConnectionState) (until time.Time) {
	sooner := func(c *x509.Certificate) {
		if c != nil && (until.IsZero() || c.NotAfter.Before(until)) {
			until = c.NotAfter.UTC()
		}
	}
	if len(st.PeerCertificates) > 0 {
		sooner(st.PeerCertificates[0])
	}
	for i := range t.Certificates {
		sooner(t.Certificates[i].Leaf)
	}
	return until
}

// explainTLS says what a person can do about a connection that failed over certificates; empty: it did not.
func explainTLS(err error) string {
	var unknown x509.UnknownAuthorityError
	var invalid x509.CertificateInvalidError
	var host x509.HostnameError
	switch text := err.Error(); {
	case errors.As(err, &unknown):
		return "the broker's certificate is not signed by an authority of ca_file"
	case errors.As(err, &invalid) && invalid.Reason == x509.Expired:
		return "the broker's certificate has expired or is not valid yet (look at this computer's clock too)"
	case errors.As(err, &host):
		return "the broker's certificate is for another name than the one in the skid file"
	case strings.Contains(text, "remote error: tls: ") && strings.Contains(text, "expired"):
		return "the broker says that the client certificate (cert_file) has expired"
	case strings.Contains(text, "remote error: tls: ") && (strings.Contains(text, "certificate") || strings.Contains(text, "authority")):
		return "the broker does not take the client certificate (cert_file, key_file), or wants one"
	}
	return ""
}
