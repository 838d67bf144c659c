// Package wire is the form in which results leave the line: findings, alarms, features, turns and health as JSON, in
// the units people read with the unit in every name. Review files, MQTT payloads, the journal and the page's API all
// use it. A value that cannot be known is absent, never zero and never NaN.
// Each message and each line of a review file has a JSON Schema (see Schema), which the tests hold it to.
package wire
