package main

import (
	"bytes"
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"
)

// TestSystemMessages: mosquitto_sub listens to the running demo, and a JSON Schema validator of others holds every
// message to its published schema.
func TestSystemMessages(t *testing.T) {
	system(t)
	strangers := os.Getenv("LAPWING_STRANGERS")
	if _, err := os.Stat(filepath.Join(strangers, "node_modules", "ajv")); err != nil {
		t.Fatalf("LAPWING_STRANGERS must name the folder that make system fills: %v", err)
	}
	demo := start(t, nil, built(t, "lapwing"), "demo", "--once", "--fast", "--out", filepath.Join(t.TempDir(), "demo"))
	address := regexp.MustCompile(`tcp://127\.0\.0\.1:(\d+)`)
	demo.until(20*time.Second, "the demo says where its broker is", func() bool { return address.MatchString(demo.out.String()) })
	port := address.FindStringSubmatch(demo.out.String())[1]
	sub := start(t, nil, tool(t, "mosquitto_sub"), "-h", "127.0.0.1", "-p", port, "-i", "validator", "-q", "1", "-t", "#", "-F", format)
	demo.until(2*time.Minute, "standing alarms, features and health", func() bool {
		s := sub.out.String()
		return strings.Contains(s, "/alarm ") && strings.Contains(s, "/standing/") && strings.Contains(s, "/features/t2 ") && strings.Contains(s, "/health ")
	})
	if code := demo.end(2 * time.Minute); code != 0 {
		t.Fatalf("demo: exit %d", code)
	}
	cmd := exec.CommandContext(t.Context(), tool(t, "node"), filepath.Join(root(t), "testdata", "messages", "check.mjs"), strangers, filepath.Join(root(t), "internal", "wire", "schema"), "lapwing")
	cmd.Stdin = strings.NewReader(strings.Join(sub.out.lines(), "\n"))
	var errs bytes.Buffer
	cmd.Stderr = &errs
	raw, err := cmd.Output()
	if err != nil {
		t.Fatalf("check.mjs: %v\n%s", err, errs.String())
	}
	var got struct {
		Objections []string       `json:"objections"`
		Messages   map[string]int `json:"messages"`
		Unnamed    []string       `json:"unnamed"`
	}
	if err := json.Unmarshal(raw, &got); err != nil {
		t.Fatalf("check.mjs: %v\n%s", err, raw)
	}
	t.Logf("messages %v", got.Messages)
	if len(got.Objections) > 0 {
		t.Errorf("the validator objects:\n%s", strings.Join(got.Objections, "\n"))
	}
	if len(got.Unnamed) > 0 {
		t.Errorf("numbers whose name has no unit and that stand in no list of those that need none: %q", got.Unnamed)
	}
	for _, part := range []string{"alarm", "standing", "features", "health"} {
		if got.Messages[part] == 0 {
			t.Errorf("no message on %s", part)
		}
	}
	// The last of health is what the daemon says when it leaves.
	var last string
	for _, l := range sub.out.lines() {
		if strings.Contains(l, "/health ") {
			last = l
		}
	}
	if !strings.Contains(last, `"state":"offline"`) {
		t.Errorf("the last of health is %s", last)
	}
}
