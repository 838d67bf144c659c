// Package ledger keeps what must not be forgotten: the alarm journal, the alarm points, baselines and the outbox.
//
//	Needs: transitions, snapshots, documents and messages, handed over in one Commit per alarm evaluation.
//	Waits: for the disk: Commit returns when everything of it is there (two flushes), and never in part.
//	Emits: the same again after a restart; messages in order until they are acknowledged.
//	It gives an error that says what is wrong when the disk refuses; a record whose checksum fails is set apart and
//	reported, a file that cannot be used at all is kept under another name for ever and reported.
//
// # Layout of state.db
//
//	head      "format"                       "lapwing ledger layout 1"
//	journal   transition id, 8 bytes BE  ->  CRC32C, JSON of alarm.Transition
//	act       act id, 8 bytes BE         ->  CRC32C, JSON of alarm.Act; its place among transitions is inside
//	outbox    a sub-bucket per class: message id, 8 bytes BE -> CRC32C, flags, created, topic, payload
//	doc       name                       ->  CRC32C, JSON
//	baseline  version, 8 bytes BE        ->  CRC32C, JSON of created, note and the baseline
//	count     name                       ->  CRC32C, JSON number: last message id, drops per class
//	bad       bucket/key                 ->  records whose checksum failed, as they were found
//
// A commit whose end is not known (the disk fails while it is written) may be made again as it was: the ids that were not
// taken over are given once more, and the same records are written in their places.
//
// Values are small and keys rise, so flat buckets are right here; the big samples are the tape's, in other files, so
// that their commits never hold up an alarm's.
package ledger
