// Package uplink carries alarm transitions, standing alarms, condensed features and health to an MQTT broker.
//
// needs: an outbox that survives a restart (alarm transitions are put there in the same transaction as the journal),
// and the newest features and health as they come; waits: for nothing, everything here is best effort and slows
// nobody; emits: MQTT 3.1.1 messages at QoS 1. A transition leaves the outbox on the broker's acknowledgement only,
// so a receiver may see it twice and drops the repeat by its id. While the broker is away, transitions wait in
// the outbox and only the newest features and health are kept. In the dialect of Sparkplug B (see Sparkplug) the same
// goes out as births and data at QoS 0, each transition with its JSON right behind it, whose acknowledgement counts.
//
// Where a skid file allows it, orders of the control room come in on Topics.Command (JSON, at most wire.MaxOrder bytes, 30
// at once and one a second, each with a request that makes a repeat harmless) and are answered on Topics.Receipt.
//
// When it cannot: Status says why, attempts go on with growing pauses, and nobody else notices.
//
// Every connection is a new client: a client that reconnects by itself reports a publish as done that no broker has
// acknowledged. On each of them health and standing alarms are sent again, and every quarter of an hour, since brokers
// forget; and the daemon listens for its own health, since brokers acknowledge what their access list makes them drop.
package uplink
