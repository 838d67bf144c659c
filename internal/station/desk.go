package station

import (
	"context"
	"crypto/rand"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"math"
	"path/filepath"
	"slices"
	"sync"
	"time"

	"lapwing/internal/alarm"
	"lapwing/internal/ledger"
	"lapwing/internal/panel"
	"lapwing/internal/tape"
	"lapwing/internal/uplink"
	"lapwing/internal/verdict"
	"lapwing/internal/wire"
)

// desk holds what is shown and said, apart from the line: the last of the journal, standing alarms, the newest turn.
type desk struct {
	mu       sync.Mutex
	id       string                // of the journal: a fresh state folder begins a new one
	journal  []wire.Alarm          // newest first
	kept     uint64                // id of the newest transition that is on disk
	open     map[string]wire.Alarm // by key, what stands
	named    map[string]string     // by key, the single valve that the standing alarm names
	findings []wire.Finding
	points   wire.Alarms
	pointsAt time.Time         // sample time of the turn that they were looked at; zero: something has changed since
	latest   *wire.Turn        // whole
	good     int64             // number of the newest valid turn, with a whole record or without
	trouble  map[string]string // by cause
	featureT time.Time         // sample time of the last features sent
}

const journalShown = 40

// restore reads back what stood when the daemon stopped.
func (d *desk) restore(l *ledger.Ledger, alarms *alarm.Annunciator, skidID string) error {
	d.open, d.named, d.trouble = map[string]wire.Alarm{}, map[string]string{}, map[string]string{}
	if ok, err := l.Doc(docJournal, &d.id); err != nil {
		return err
	} else if !ok {
		d.id = rand.Text()
		if err := l.PutDoc(docJournal, d.id); err != nil {
			return err
		}
	}
	last := l.Stats().LastJournal
	d.kept, d.journal = last, nil
	from := uint64(0)
	if last > 2000 {
		from = last - 2000
	}
	trs, err := l.Journal(from, 2001)
	if err != nil {
		d.trouble["journal"] = "parts of the alarm journal cannot be read: " + err.Error()
	}
	for i := range trs {
		a := wire.FromTransition(skidID, &trs[i], "")
		a.Journal = d.id
		d.note(a)
	}
	for _, p := range alarms.Open() {
		if _, known := d.open[p.Key]; !known {
			d.open[p.Key] = wire.FromPoint(skidID, &p)
		}
	}
	return nil
}

// note keeps a transition for display.
func (d *desk) note(a wire.Alarm) {
	d.journal = slices.Insert(d.journal, 0, a)
	if len(d.journal) > journalShown {
		d.journal = d.journal[:journalShown]
	}
	if a.Open {
		d.open[a.Key] = a
	} else {
		delete(d.open, a.Key)
		delete(d.named, a.Key)
	}
}

// take books everything that one turn brought: first what must not be lost, then what is shown.
func (s *Station) take(o *Output) error {
	err := s.book(o)
	s.reference(o)
	s.portray(o)
	s.publish(o, o.At)
	if s.o.OnTurn != nil && o.Record.Type != "" {
		s.o.OnTurn(&o.Record)
	}
	return err
}

// book commits transitions, alarm states and messages in one transaction, so that a crash loses none and repeats none.
func (s *Station) book(o *Output) error {
	if o.LearnError != nil {
		s.log.Error("the learning run gave no baseline", "err", o.LearnError)
		s.desk.say("learning", "the learning run gave no baseline: "+o.LearnError.Error())
		s.learning.dirty = true
	}
	if o.Baseline != nil {
		s.unkept = o.Baseline
	}
	if o.Proposed != nil {
		s.proposed(o.Proposed)
	}
	s.append(o.Transitions)
	return errors.Join(s.keepBaseline(), s.commit())
}

// append takes transitions in for the next commit. After this nothing but the end of the process can lose them. The page
// shows them at once, whatever the disk does.
func (s *Station) append(trs []alarm.Transition) {
	for i := range trs {
		t := &trs[i]
		said := wire.FromTransition(s.sk.ID, t, s.protect(t))
		said.Journal = s.desk.id
		s.unsaid = append(s.unsaid, saying{tr: *t, said: said})
		s.desk.mu.Lock()
		s.desk.note(said)
		s.desk.pointsAt = time.Time{}
		s.desk.mu.Unlock()
	}
}

// saying is an entry of the journal that is not on disk yet: a transition with its outside form, or a person's act.
type saying struct {
	tr   alarm.Transition
	said wire.Alarm
	act  *alarm.Act
}

// commit writes the entries that are not on disk yet. A disk that refuses (full, read-only) loses none of them: they
// are tried again with every turn, in order, and page and health say so.
func (s *Station) commit() error {
	alarms := s.line.Alarms()
	if len(s.unsaid) == 0 && !alarms.Unsaved() {
		return nil
	}
	err := s.ledger.Commit(func(tx *ledger.Tx) error {
		changed := alarms.Unsaved()
		for i := range s.unsaid {
			if s.unsaid[i].act != nil {
				if err := tx.Act(*s.unsaid[i].act); err != nil {
					return err
				}
				continue
			}
			changed = true
			tr, said := s.unsaid[i].tr, s.unsaid[i].said
			if err := tx.Journal(tr); err != nil {
				return err
			}
			payload, err := json.Marshal(said)
			if err != nil {
				return fmt.Errorf("station: alarm %d: %w", said.ID, err)
			}
			if _, err := tx.Enqueue(ledger.Alarm, s.topics.Alarm(), payload, false); err != nil {
				return err
			}
			if !said.Open {
				payload = nil // an empty retained message takes the standing alarm off the board
			}
			if _, err := tx.Enqueue(ledger.Alarm, s.topics.Standing(said.Key), payload, true); err != nil {
				return err
			}
		}
		if !changed {
			return nil
		}
		if err := tx.PutDoc(docLine, s.line.Memory()); err != nil {
			return err
		}
		return tx.AlarmSnapshot(alarms.Snapshot())
	})
	if err != nil {
		s.desk.say("ledger", fmt.Sprintf("%d entries of the alarm journal are not on disk yet and were not sent: %v", len(s.unsaid), err))
		return err
	}
	alarms.Saved()
	s.desk.say("ledger", "")
	s.desk.mu.Lock()
	for i := range s.unsaid {
		if s.unsaid[i].act != nil {
			continue
		}
		a := &s.unsaid[i].said
		s.desk.kept = a.ID
		s.log.Info("alarm", "id", a.ID, "point", a.Key, "from", a.From, "to", a.To, "severity", a.Severity, "said", a.Sentence)
	}
	s.desk.mu.Unlock()
	if s.pub != nil && len(s.unsaid) > 0 {
		s.pub.Wake()
	}
	clear(s.unsaid)
	s.unsaid = s.unsaid[:0]
	return nil
}

// protect asks the tape for the raw samples around an alarm that is raised or grows worse.
func (s *Station) protect(t *alarm.Transition) string {
	if t.To != alarm.Unacked || t.Seq1 == 0 || t.By != "" || t.From == alarm.Shelved || t.From == alarm.Suppressed {
		return "" // what comes back into view was raised long ago, perhaps in a run with other sample numbers
	}
	from := max(0, t.Seq0-int64(s.sk.Tape.Pre.Seconds()*s.info.Rate))
	c, err := s.cut(tape.Clip{
		ID:     fmt.Sprintf("%s-%d", t.At.UTC().Format("20060102T150405Z"), t.ID),
		Reason: fmt.Sprintf("alarm %d: %s %s, %s", t.ID, t.Subject, t.Kind, t.Severity), AlarmID: t.ID,
		From: from, To: t.Seq1 + int64(s.sk.Tape.Post.Seconds()*s.info.Rate),
	})
	if err != nil {
		s.log.Error("raw samples of an alarm are not protected", "alarm", t.ID, "err", err)
		s.desk.say("clip", fmt.Sprintf("the raw samples of alarm %d are not protected: %v", t.ID, err))
		return ""
	}
	return c.ID
}

// say keeps a plain sentence about the monitor itself for page and health; an empty one takes it back.
func (d *desk) say(cause, sentence string) {
	d.mu.Lock()
	defer d.mu.Unlock()
	if sentence == "" {
		delete(d.trouble, cause)
		return
	}
	d.trouble[cause] = sentence
}

// publish swaps in a new snapshot and offers features when they are due. at is the sample time of the turn.
func (s *Station) publish(o *Output, at time.Time) {
	d := &s.desk
	d.mu.Lock()
	d.show(&o.Record)
	var renewed []wire.Alarm
	if o.Judged {
		d.findings = wireFindings(o.Findings, s.line)
		renewed = d.renew(d.findings, o.At)
	}
	if d.pointsAt.IsZero() || at.Sub(d.pointsAt).Abs() >= time.Second {
		s.look()
		d.pointsAt = at
	}
	n := &wire.Now{Skid: s.sk.ID, Name: s.sk.Name, Site: s.sk.Site, At: at, Latest: d.latest, Findings: d.findings,
		Standing: d.standing(), Journal: slices.Clone(d.journal), Clips: s.clips(), Caution: wire.Caution}
	points := d.points
	d.mu.Unlock()
	n.Health = s.health(at)
	s.now.Store(n)
	if s.registers != nil {
		s.registers.Show(n, points.Points, points.Flood)
	}
	s.showLearning(at)
	for i := range renewed {
		if b, err := json.Marshal(renewed[i]); err == nil && s.pub != nil {
			s.pub.Offer(s.topics.Standing(renewed[i].Key), b, true)
		}
	}
	if s.pub != nil && o.Record.Valid && at.Sub(d.featureT).Abs() >= s.sk.Uplink.FeaturesEvery {
		d.featureT = at
		for i := range s.sk.Throws {
			id := s.sk.Throws[i].ID
			b, err := wire.FromVector(s.sk.ID, id, i, s.line.Layout(), o.Vector, at, o.Points[i].State.String())
			if err != nil {
				s.log.Error("features", "err", err)
				continue
			}
			s.pub.Offer(s.topics.Features(id), b, false)
		}
	}
}

// show keeps the turn that is to be seen: whole records, and invalid turns when they last.
func (d *desk) show(r *wire.Turn) {
	switch {
	case r.Type == "":
		return
	case r.Valid:
		if d.good = r.Turn; len(r.Throws) == 0 {
			return
		}
	case d.latest != nil && d.latest.Valid && r.Turn-d.good <= toldInvalid:
		return
	}
	rec := *r
	d.latest = &rec
}

// toldInvalid is how many turns in a row may be invalid before the page shows one instead of the last good turn.
const toldInvalid = 5

// renewEvery is how often a standing alarm's evidence is renewed for the control room, in sample time.
const renewEvery = time.Minute

// renew brings the evidence of open alarms up to date: a leak grows, the cover temperature names the valve. It is no
// transition and no news; the retained standing message and the page follow. Given back are those due to be sent.
func (d *desk) renew(findings []wire.Finding, at time.Time) (due []wire.Alarm) {
	for i := range findings {
		f := &findings[i]
		a, open := d.open[f.Subject+"/"+f.Kind]
		if !open {
			continue
		}
		before := a.Renewed
		if before.IsZero() {
			before = a.At
		}
		named := f.Valve != "" && d.named[a.Key] != f.Valve
		if at.Sub(before).Abs() < renewEvery && !named || a.ID > d.kept {
			continue
		}
		a.Sentence, a.Detail, a.Renewed = f.Sentence, *f, at.UTC()
		d.open[a.Key], d.named[a.Key] = a, f.Valve
		due = append(due, a)
	}
	return due
}

// standing lists open alarms, worst first, then oldest.
func (d *desk) standing() []wire.Alarm {
	out := make([]wire.Alarm, 0, len(d.open))
	for _, a := range d.open {
		out = append(out, a)
	}
	rank := map[string]int{"danger": 0, "alert": 1, "advisory": 2}
	slices.SortFunc(out, func(a, b wire.Alarm) int {
		ra, rb := rank[a.Severity], rank[b.Severity]
		if ra != rb {
			return ra - rb
		}
		if c := a.At.Compare(b.At); c != 0 {
			return c
		}
		return int(int64(a.ID) - int64(b.ID))
	})
	return out
}

func wireFindings(fs []verdict.Finding, l *Line) []wire.Finding {
	out := make([]wire.Finding, 0, len(fs))
	for i := range fs {
		if fs[i].Grade > verdict.None {
			out = append(out, wire.FromFinding(&fs[i], l.Layout()))
		}
	}
	return out
}

// health gathers what the daemon knows of itself.
func (s *Station) health(at time.Time) wire.Health {
	st, c := s.tape.Stats(), s.line.Count()
	phase := s.line.Phase()
	h := wire.Health{Version: 1, Skid: s.sk.ID, At: at, Heartbeat: s.sk.Uplink.HealthEvery.Seconds(), State: phase.State.String(), Turns: c.Turns, BadTurns: c.Invalid,
		SamplesLost: c.Lost, QueueFull: s.dropped.Load(), Learned: s.line.Judging()}
	if !math.IsNaN(phase.RPM) {
		rpm := math.Round(phase.RPM*10) / 10
		h.RPM = &rpm
	}
	have, want := s.line.Learnt()
	switch {
	case want > 0:
		h.LearnLeft = want - have
		h.Line = fmt.Sprintf("learning, %d of %d steady turns", have, want)
	case s.line.Judging():
		h.Line = "watching"
	default:
		h.Line = "measuring only: no baseline yet (declare the machine healthy with --learn)"
	}
	h.Channels = s.line.Channels()
	h.Tape = wire.TapeHealth{Bytes: st.LiveBytes, Limit: s.sk.Tape.MaxBytes, Oldest: st.OldestUTC, Newest: st.NewestUTC, Dropped: int64(st.QueueDroppedBlocks), Clips: st.Clips,
		Problems: tapeTroubles(&st, s.info.Rate)}
	h.Trouble = append(h.Trouble, h.Tape.Problems...)
	if s.plant != nil {
		h.Trouble = append(h.Trouble, s.plant.Troubles(time.Now())...)
	}
	if s.pub != nil {
		st := s.pub.Status()
		h.Uplink = st
		h.Trouble = append(h.Trouble, s.uplinkTroubles(&st, time.Now())...)
	}
	if a := s.line.Alarms(); a.Flood() {
		said := "alarm flood: more alarms have come within ten minutes than a person can follow"
		if open := a.Open(); len(open) > 0 {
			said += "; the first of those that stand was " + open[0].Key
		}
		h.Trouble = append(h.Trouble, said)
	}
	s.desk.mu.Lock()
	for _, k := range slices.Sorted(maps.Keys(s.desk.trouble)) {
		h.Trouble = append(h.Trouble, s.desk.trouble[k])
	}
	s.desk.mu.Unlock()
	if n := s.dropped.Load(); n > 0 {
		h.Trouble = append(h.Trouble, fmt.Sprintf("the line was too slow for %d blocks: the tape has them, they were not analysed", n))
	}
	s.tellOfSelf(&h, &st)
	return h
}

func (s *Station) offerHealth() {
	n := s.Now()
	h := s.health(n.At)
	if s.pub == nil {
		return
	}
	if b, err := json.Marshal(h); err == nil {
		s.pub.Offer(s.topics.Health(), b, true)
	}
}

// offline is the last will and the message of a clean stop.
func (s *Station) offline() []byte { return wire.Offline(s.sk.ID) }

// standing renews the retained standing alarms after a connection is made.
func (s *Station) standing() []uplink.Message {
	s.desk.mu.Lock()
	defer s.desk.mu.Unlock()
	var out []uplink.Message
	for _, a := range s.desk.standing() {
		if b, err := json.Marshal(a); err == nil {
			out = append(out, uplink.Message{Topic: s.topics.Standing(a.Key), Payload: b, Retain: true})
		}
	}
	// And nothing for the others: a broker that was killed may have forgotten that it was told so.
	for i := range s.desk.points.Points {
		if key := s.desk.points.Points[i].Key; s.desk.open[key].Key == "" {
			out = append(out, uplink.Message{Topic: s.topics.Standing(key), Retain: true})
		}
	}
	return out
}

// drainUplink gives the last messages a moment to leave at the end of a source that ends.
func (s *Station) drainUplink(limit time.Duration) {
	for end := time.Now().Add(limit); time.Now().Before(end); time.Sleep(20 * time.Millisecond) {
		m, err := s.ledger.Next(0, 1)
		if err != nil || len(m) == 0 {
			return
		}
	}
}

// outbox lets the publisher read the ledger.
type outbox struct{ l *ledger.Ledger }

func (o outbox) Next(after uint64, max int) ([]uplink.Message, error) {
	ms, err := o.l.Next(after, max)
	out := make([]uplink.Message, len(ms))
	for i, m := range ms {
		out[i] = uplink.Message{ID: m.ID, Topic: m.Topic, Payload: m.Payload, Retain: m.Retain}
	}
	return out, err
}

func (o outbox) Ack(ids []uint64) error { return o.l.Ack(ids) }

func (s *Station) clips() []wire.Clip { return wireClips(s.tape, s.info.Rate, s.info.Start) }

// wireClips lists a tape's clips. One that is complete, which may be of an earlier run, has its times by what is stored;
// one that is still being recorded by the source's clock, which knows of what is to come.
func wireClips(t *tape.Tape, rate float64, start time.Time) []wire.Clip {
	var out []wire.Clip
	for _, c := range t.Clips() {
		w := wire.Clip{ID: c.ID, Reason: c.Reason, Alarms: c.Alarms, Samples: [2]int64{c.From, c.To}, Complete: c.Complete}
		if kept, err := t.Stored(c.ID); err == nil {
			w.From, w.To, w.Bytes = kept.From, kept.To, kept.Bytes
		}
		if !c.Complete && c.Run == t.Run() && !start.IsZero() {
			w.From = start.Add(time.Duration(float64(c.From) / rate * 1e9)).UTC()
			w.To = start.Add(time.Duration(float64(c.To) / rate * 1e9)).UTC()
		}
		out = append(out, w)
	}
	return out
}

// Export writes a clip into dir: WAV, skid file, process values, note.
func (s *Station) Export(ctx context.Context, clip, dir string) error {
	if err := s.tape.Flush(ctx); err != nil {
		return err
	}
	return exportClip(s.tape, clip, dir)
}

func exportClip(t *tape.Tape, clip, dir string) error {
	if clip == "" || clip != filepath.Base(clip) {
		return fmt.Errorf("station: clip %q: %w", clip, panel.ErrNoClip)
	}
	_, err := t.ExportClip(filepath.Join(dir, clip), clip)
	if errors.Is(err, tape.ErrNoClip) {
		return fmt.Errorf("station: clip %q: %w", clip, panel.ErrNoClip)
	}
	return err
}
