// Package sparkplug says what an edge node of Sparkplug B 3.0 (Eclipse Foundation, an open specification) has to say,
// and reads what is said to it. It knows no broker and no clock.
//
// needs: metrics with their times, and what a host sends; waits: for nothing; emits: topics and payloads, all of them
// at QoS 0 and not retained but for the will. When it cannot (a payload that is no Sparkplug payload): an error, and
// nothing has changed.
//
// Rules are named by their identifiers in the specification (tck-id-…).
package sparkplug
