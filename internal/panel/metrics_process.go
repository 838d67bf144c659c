package panel

import (
	"math"
	"runtime"
	"runtime/metrics"
)

// processMetrics is what any Go program can say of itself, under the names that dashboards of that ecosystem know.
// runtime/metrics stops nothing, unlike runtime.ReadMemStats.
func processMetrics() []Family {
	one := func(v float64, labels ...Label) []Series { return []Series{{labels, v}} }
	out := []Family{{Name: "go_info", Help: "Version of Go that the program was built with.", Series: one(1, Label{"version", runtime.Version()})}}
	s := make([]metrics.Sample, len(runtimeSaid))
	for i := range runtimeSaid {
		s[i].Name = runtimeSaid[i].from
	}
	metrics.Read(s)
	for i, r := range runtimeSaid {
		v := math.NaN()
		switch s[i].Value.Kind() {
		case metrics.KindUint64:
			v = float64(s[i].Value.Uint64())
		case metrics.KindFloat64:
			v = s[i].Value.Float64()
		}
		out = append(out, Family{Name: r.name, Help: r.help, Counter: r.counter, Series: one(v)})
	}
	return append(out, ownProcess()...)
}

var runtimeSaid = [...]struct {
	from, name, help string
	counter          bool
}{
	{"/sched/goroutines:goroutines", "go_goroutines", "Goroutines that exist.", false},
	{"/sched/gomaxprocs:threads", "go_sched_gomaxprocs_threads", "Cores that Go code may use at once.", false},
	{"/memory/classes/heap/objects:bytes", "go_memstats_alloc_bytes", "Bytes of heap objects, live or not yet swept.", false},
	{"/gc/heap/allocs:bytes", "go_memstats_alloc_bytes_total", "Bytes allocated on the heap since the start.", true},
	{"/gc/heap/objects:objects", "go_memstats_heap_objects", "Objects on the heap.", false},
	{"/gc/heap/goal:bytes", "go_memstats_next_gc_bytes", "Heap size at which the next collection is to end.", false},
	{"/memory/classes/total:bytes", "go_memstats_sys_bytes", "Bytes that Go has mapped from the system.", false},
	{"/gc/cycles/total:gc-cycles", "go_gc_cycles_total", "Garbage collections since the start.", true},
	{"/cpu/classes/gc/total:cpu-seconds", "go_cpu_gc_seconds_total", "CPU time of the garbage collection since the start, as Go estimates it.", true},
	{"/gc/gomemlimit:bytes", "go_gc_gomemlimit_bytes", "Memory limit that Go was given; 2^63-1 for none.", false},
}
