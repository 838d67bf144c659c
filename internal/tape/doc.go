// Package tape keeps the raw samples: a rolling buffer bounded in bytes and age, and the clips cut from it.
//
//	Needs: blocks of raw counts as the source gave them; wishes for clips; process values and phase marks if there are any.
//	Waits: a second of samples (Options.Segment), then one commit; a clip waits until its last sample has come.
//	Emits: the stored blocks, count for count, by sample number, by time or by clip; exports; its own Stats.
//	It gives a gap with its length and reason where samples were lost, dropped, rolled away or are unreadable, never a
//	guess and never zeros.
//
// # Lifetimes
//
// Append copies and never waits for the disk: a bounded queue lies between, and when it is full the oldest block in it
// is dropped and counted. Blocks handed to the callback of Read are valid during that call only. Read holds no
// transaction while the callback runs, so a slow receiver does not make the file grow.
//
// # Layout on disk
//
// Two bbolt files with the same four buckets. The ring (tape.db) may be thrown away at any time; the clips (tape.db's
// neighbour, clips.db) may not. They are apart because a bbolt file never shrinks and has one writer lock, and so that
// damage to the one does not touch the other.
//
//	head   "format"                         "lapwing tape layout 1" / "lapwing clips layout 1"
//	raw    segment number, 8 bytes BE  ->   a sub-bucket, written once, deleted whole:
//	           channel number, 2 bytes BE   channel record: 24-byte header with CRC32C, then the packed counts
//	           "meta"                       CRC32C, then JSON: run, first sample, rate, UTC, gaps, skid file, process values
//	idx    segment number              ->   48 bytes: run, samples, first and last sample number, UTC, size, CRC32C
//	skid   SHA-256 of the skid file    ->   the file, zstd
//	clips  clip id (clips.db only)     ->   CRC32C, then JSON
//	states run and sample (clips.db)   ->   a sub-bucket: what the analysis knew where a clip begins
//
// One sub-bucket per segment is what keeps bytes written per byte kept near one: large values in a flat bucket are
// copied again and again by their neighbours' commits. Segment numbers rise for ever over both files and all restarts.
// A run is a stretch in which the source's sample numbers are one count; a restarted source begins a new run.
package tape
