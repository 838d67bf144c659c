package main

import (
	"bytes"
	"context"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

// The tests of this folder run the built hand tool as its users do. They are switched on by `make system`.

// system skips unless the system tests are on.
func system(t *testing.T) {
	t.Helper()
	if os.Getenv("LAPWING_SYSTEM") != "1" {
		t.Skip("short run: the built programs are tested by make system (LAPWING_SYSTEM=1, LAPWING_BIN)")
	}
	t.Parallel()
}

// tool finds a program that the tests cannot do without; make setup installs it.
func tool(t *testing.T, name string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		t.Fatalf("%s is not installed: make setup does it", name)
	}
	return path
}

// configs is the folder of example skid files.
const configs = "../../configs"

// run runs a program to its end.
func run(t *testing.T, limit time.Duration, path string, args ...string) (stdout, stderr string, code int) {
	t.Helper()
	ctx, stop := context.WithTimeout(t.Context(), limit)
	defer stop()
	cmd := exec.CommandContext(ctx, path, args...)
	var out, errs bytes.Buffer
	cmd.Stdout, cmd.Stderr, cmd.WaitDelay = &out, &errs, 5*time.Second
	err := cmd.Run()
	if ctx.Err() != nil {
		t.Fatalf("%s %v: not done after %s\n%s%s", filepath.Base(path), args, limit, out.String(), errs.String())
	}
	var exit *exec.ExitError
	if err != nil && !errors.As(err, &exit) {
		t.Fatal(err)
	}
	return out.String(), errs.String(), cmd.ProcessState.ExitCode()
}

// lapwing runs the built hand tool.
func lapwing(t *testing.T, args ...string) (stdout, stderr string, code int) {
	t.Helper()
	path := filepath.Join(os.Getenv("LAPWING_BIN"), "lapwing")
	if _, err := os.Stat(path); err != nil {
		t.Fatalf("LAPWING_BIN must name the folder with the built programs: %v", err)
	}
	return run(t, 2*time.Minute, path, args...)
}
