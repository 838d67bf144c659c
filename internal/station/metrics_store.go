package station

import (
	"slices"

	"lapwing/internal/ledger"
	"lapwing/internal/panel"
)

func (c *scrape) tape(s *Station) {
	st := s.tape.Stats()
	c.gauge("tape_up", "1 while raw samples are kept.", yes(st.Down == nil))
	c.gauge("tape_live_bytes", "Samples and what belongs to them, reckoned on the high side: the rolling tape, and the protected clips.",
		count(st.LiveBytes, "file", "tape"), count(st.ClipLiveBytes, "file", "clips"))
	c.gauge("tape_file_bytes", "Size of the file; it does not shrink.", count(st.FileBytes, "file", "tape"), count(st.ClipFileBytes, "file", "clips"))
	c.gauge("tape_limit_bytes", "Size that the skid file allows.", count(s.sk.Tape.MaxBytes, "file", "tape"), count(s.sk.Tape.ClipBytes, "file", "clips"))
	c.gauge("tape_segments", "Stretches of samples on the tape.", count(st.Segments))
	c.gauge("tape_oldest_timestamp_seconds", "Sample time of the oldest sample on the tape.", stamp(st.OldestUTC))
	c.gauge("tape_newest_timestamp_seconds", "Sample time of the newest committed sample.", stamp(st.NewestUTC))
	if p := s.meter.shown.Load(); p != nil {
		if d, ok := notYetOnDisk(&st, p.position, s.info.Rate); ok {
			c.gauge("tape_uncommitted_seconds", "Samples that have gone through the line and are not on disk: what a power cut would take.", value(d.Seconds()))
		}
	}
	c.counter("tape_written_bytes_total", "Bytes written to both files, with all that the store writes beside the samples.", count(st.WrittenBytes))
	c.counter("tape_kept_bytes_total", "Bytes of samples among them.", count(st.KeptBytes))
	c.counter("tape_commits_total", "Commits of both files.", count(st.Commits))
	c.counter("tape_failed_commits_total", "Commits that the disk refused.", count(st.FailedCommits))
	c.gauge("tape_worst_commit_seconds", "Slowest commit since the start.", value(st.WorstCommit.Seconds()))
	c.counter("tape_dropped_blocks_total", "Blocks that were dropped because the disk was too slow.", count(st.QueueDroppedBlocks))
	c.counter("tape_dropped_samples_total", "Samples per channel in them.", count(st.QueueDroppedSamples))
	c.counter("tape_refused_segments_total", "Stretches of samples that the disk refused.", count(st.LostSegments))
	c.counter("tape_refused_samples_total", "Samples per channel in them.", count(st.LostSamples))
	c.gauge("tape_damaged_files", "Files that were found damaged since the start.", count(len(st.Damage)))
	c.gauge("clips", "Protected stretches of raw samples.", count(st.Clips-st.ClipsPending, "state", "complete"), count(st.ClipsPending, "state", "pending"))
	c.counter("clips_released_total", "Clips that were let go for room.", count(st.ClipsReleased))
	c.counter("clips_short_total", "Clips that hold less than was asked for.", count(st.ClipsShort))
	c.gauge("tape_error", "1 when the tape met an error since the start; the health message has its words.", yes(st.LastError != nil))
}

func (c *scrape) ledger(s *Station) {
	st := s.ledger.Stats()
	var waiting, dropped []panel.Series
	classes := make([]ledger.Class, 0, len(st.Waiting))
	for k := range st.Waiting {
		classes = append(classes, k)
	}
	for _, k := range slices.Sorted(slices.Values(classes)) {
		waiting = append(waiting, count(st.Waiting[k], "class", k.String()))
		dropped = append(dropped, count(st.Dropped[k], "class", k.String()))
	}
	c.gauge("outbox_messages", "Messages that wait for the broker's acknowledgement.", waiting...)
	c.counter("outbox_dropped_messages_total", "Messages that gave way to newer ones since the state file was made.", dropped...)
	c.gauge("outbox_oldest_timestamp_seconds", "When the oldest message that waits was put there; absent when none waits.", stamp(st.OldestWait))
	c.counter("journal_transitions_total", "Alarm transitions since the state file was made.", count(st.LastJournal))
	c.counter("journal_acts_total", "People's orders, carried out or refused, since the state file was made.", count(st.LastAct))
	c.counter("journal_released_entries_total", "Transitions and orders that were let go for age since the state file was made.", count(st.JournalGone+st.ActsGone))
	c.counter("ledger_commits_total", "Commits of the state file.", count(st.Commits))
	c.counter("ledger_failed_commits_total", "Commits of the state file that failed.", count(st.FailedCommit))
	c.gauge("ledger_worst_commit_seconds", "Slowest commit of the state file since the start.", value(st.WorstCommit.Seconds()))
	c.gauge("ledger_bad_records", "Records that were set apart at the start because their checksum failed.", count(len(st.BadRecords)))
}

func (c *scrape) uplink(s *Station) {
	if s.pub == nil {
		return
	}
	st := s.pub.Status()
	c.gauge("uplink_connected", "1 while the broker is connected.", yes(st.Connected))
	c.gauge("uplink_since_timestamp_seconds", "Since when it is, or is not.", stamp(st.Since))
	c.counter("uplink_connections_total", "Connections that were made.", count(st.Connections))
	c.counter("uplink_acknowledged_messages_total", "Messages of the outbox that the broker has acknowledged.", count(st.Sent))
	c.counter("uplink_replaced_messages_total", "Features and health that newer ones overtook before they were sent.", count(st.Replaced))
	c.counter("uplink_dropped_messages_total", "Features and health given up because too many topics waited.", count(st.Dropped))
	c.counter("uplink_refused_messages_total", "Messages with a topic that MQTT does not allow, taken out unsent.", count(st.Refused))
}
