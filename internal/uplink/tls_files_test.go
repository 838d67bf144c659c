package uplink

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestCredentialsOfSystemd(t *testing.T) {
	dir := t.TempDir()
	t.Setenv(credentials, dir)
	if got, err := place("$CREDENTIALS_DIRECTORY/mqtt-user"); err != nil || got != filepath.Join(dir, "mqtt-user") {
		t.Errorf("%q, %v", got, err)
	}
	for _, plain := range []string{"", "/etc/lapwing/user", "/etc/$CREDENTIALS_DIRECTORY/x"} {
		if got, err := place(plain); err != nil || got != plain {
			t.Errorf("%q became %q, %v", plain, got, err)
		}
	}
	t.Setenv(credentials, "")
	cfg := config("tls://127.0.0.1:1")
	for _, set := range []func(string){
		func(f string) { cfg.UserFile = f }, func(f string) { cfg.PasswordFile, cfg.UserFile = f, "" },
		func(f string) { cfg.CAFile, cfg.PasswordFile = f, "" }, func(f string) { cfg.CertFile, cfg.KeyFile, cfg.CAFile = f, f, "" },
	} {
		set("$CREDENTIALS_DIRECTORY/mqtt")
		if _, err := cfg.options(); err == nil || !strings.Contains(err.Error(), "LoadCredential=mqtt:") {
			t.Errorf("%+v: %v", cfg, err)
		}
	}
}

func TestSecretsThatEverybodyCanRead(t *testing.T) {
	for mode, warned := range map[os.FileMode]bool{0o644: true, 0o640: false, 0o600: false} {
		cfg := config("tcp://127.0.0.1:1")
		cfg.UserFile, cfg.PasswordFile = write(t, "u"), write(t, "s3cret-Hunt")
		if err := os.Chmod(cfg.PasswordFile, mode); err != nil {
			t.Fatal(err)
		}
		_, out := logging(&cfg)
		if _, err := New(cfg, &store{}); err != nil {
			t.Fatal(err)
		}
		if got := strings.Contains(out.String(), "everybody on this computer can read the password file"); got != warned || strings.Contains(out.String(), "s3cret-Hunt") {
			t.Errorf("mode %o: %s", mode, out)
		}
	}
}
