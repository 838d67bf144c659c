package panel

import (
	"bytes"
	"math"
	"os"
	"strconv"
	"syscall"
)

// ownProcess is what Linux says of this process; see proc(5).
func ownProcess() []Family {
	virtual, resident := memoryPages()
	page := float64(os.Getpagesize())
	say := func(name, help string, v float64) Family {
		return Family{Name: name, Help: help, Series: []Series{{Value: v}}}
	}
	cpu := say("process_cpu_seconds_total", "CPU time, user and system, since the start.", cpuSeconds())
	cpu.Counter = true
	return []Family{cpu,
		say("process_resident_memory_bytes", "Memory that is in RAM, shared mappings of the tape's file included.", resident*page),
		say("process_virtual_memory_bytes", "Address space.", virtual*page),
		say("process_open_fds", "Open file descriptors.", openFiles()),
		say("process_max_fds", "File descriptors that may be open.", maxFiles()),
		say("process_start_time_seconds", "Start of the process, Unix time.", startTime()),
	}
}

func cpuSeconds() float64 {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return math.NaN()
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}

func memoryPages() (virtual, resident float64) {
	b, err := os.ReadFile("/proc/self/statm")
	if f := bytes.Fields(b); err == nil && len(f) >= 2 {
		return parsed(f[0]), parsed(f[1])
	}
	return math.NaN(), math.NaN()
}

func openFiles() float64 {
	d, err := os.Open("/proc/self/fd")
	if err != nil {
		return math.NaN()
	}
	defer d.Close()
	names, err := d.Readdirnames(-1)
	if err != nil {
		return math.NaN()
	}
	return float64(len(names) - 1) // without the one that this reading opened
}

func maxFiles() float64 {
	var l syscall.Rlimit
	if syscall.Getrlimit(syscall.RLIMIT_NOFILE, &l) != nil {
		return math.NaN()
	}
	return float64(l.Cur)
}

// ticks of /proc/self/stat a second: USER_HZ, which is 100 on every architecture that Go runs Linux on.
const ticks = 100

// startTime adds the start since boot (field 22 of stat; field 2 may hold blanks, in brackets) to the time of the boot.
func startTime() float64 {
	own, err := os.ReadFile("/proc/self/stat")
	end := bytes.LastIndexByte(own, ')')
	if err != nil || end < 0 {
		return math.NaN()
	}
	f := bytes.Fields(own[end+1:])
	all, err := os.ReadFile("/proc/stat")
	_, boot, ok := bytes.Cut(all, []byte("\nbtime "))
	if err != nil || !ok || len(f) < 20 {
		return math.NaN()
	}
	boot, _, _ = bytes.Cut(boot, []byte("\n"))
	return parsed(boot) + parsed(f[19])/ticks
}

func parsed(b []byte) float64 {
	v, err := strconv.ParseFloat(string(b), 64)
	if err != nil {
		return math.NaN()
	}
	return v
}
