package main

import (
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"
)

// TestWatchdogIsFedBySamplesOnly: systemd hears WATCHDOG=1 while samples pass through the line and at no other time, so
// that it restarts a daemon that is alive and deaf.
func TestWatchdogIsFedBySamplesOnly(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var samples atomic.Int64
		var mu sync.Mutex
		var told []string
		count := func() int {
			mu.Lock()
			defer mu.Unlock()
			return len(told)
		}
		done := make(chan struct{})
		go watchdog(done, 10*time.Second, samples.Load, func() string { return "running: watching" }, func(s string) {
			mu.Lock()
			defer mu.Unlock()
			told = append(told, s)
		})
		for range 5 {
			samples.Add(1024)
			time.Sleep(10 * time.Second)
			synctest.Wait()
		}
		if n := count(); n != 5 {
			t.Errorf("%d messages in five periods with samples, want 5", n)
		}
		for _, s := range told {
			if !strings.HasPrefix(s, "WATCHDOG=1\n") || !strings.Contains(s, "STATUS=running: watching") {
				t.Errorf("told %q", s)
			}
		}
		time.Sleep(time.Hour)
		synctest.Wait()
		if n := count(); n != 5 {
			t.Errorf("%d messages after an hour without samples, want still 5", n)
		}
		close(done)
	})
}
