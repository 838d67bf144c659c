// Package station is the wiring: a skid file becomes a running line with its tape, ledger, uplink and page. It is the
// only room that knows all others. A source goroutine feeds the tape and, through a bounded counted queue, the one
// goroutine that computes; edges read one immutable snapshot and can slow neither.
package station

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"sync"
	"sync/atomic"
	"time"

	"lapwing/internal/acq"
	"lapwing/internal/alarm"
	"lapwing/internal/duty"
	"lapwing/internal/ledger"
	"lapwing/internal/panel"
	"lapwing/internal/plant"
	"lapwing/internal/skid"
	"lapwing/internal/tape"
	"lapwing/internal/uplink"
	"lapwing/internal/wire"
)

// Options of a station. Broker and Listen replace what the skid file says.
type Options struct {
	SkidFile   string
	State      string // folder for tape.db, clips.db and state.db
	Source     string // wav:FILE, model:NAME or exec:FORMAT:PROGRAM
	ProcessCSV string
	Fast       bool // as fast as it goes: the source waits for the line instead of the line losing blocks
	Learn      int  // steady turns from now on that a person has declared healthy; 0: use the kept baseline
	Broker     string
	Listen     string
	Reserve    bool // take the tape's whole size on the disk at the start
	Seed       uint64
	Start      time.Time             // UTC of a modelled machine's first sample; zero: now, or after the newest entry of the journal
	OnTurn     func(*wire.Turn)      // hears of every turn, in the compute goroutine; nil: nobody
	AtEnd      func(context.Context) // called when the source has ended, while page and uplink are still up; nil: nothing
	Log        *slog.Logger
}

// Station is a running daemon.
type Station struct {
	o      Options
	log    *slog.Logger
	sk     *skid.Skid
	src    acq.Source
	info   acq.Info
	proc   processAt
	tape   *tape.Tape
	ledger *ledger.Ledger
	line   *Line
	pub    *uplink.Publisher
	panel  *panel.Panel
	topics uplink.Topics

	plant     *plant.Poller // nil: no process values over Modbus
	registers *plant.Server // nil: no register map for others

	now      atomic.Pointer[wire.Now]
	progress atomic.Int64 // samples through the line
	dropped  atomic.Int64 // blocks the line had no room for
	meter    meter
	logged   *logged
	desk     desk
	states   states

	gallery    *gallery
	referenced referenced
	learning   learningDesk
	orders     chan *request
	ended      chan struct{} // closed when no order is carried out any more
	endOnce    sync.Once

	// The compute goroutine's own.
	unsaid     []saying       // journal entries not yet on disk
	unkept     *duty.Baseline // not yet on disk
	lastAct    uint64         // id of the newest act
	begun      bool
	first, end int64     // sample numbers: of the first that came, and after the newest
	heard      time.Time // monotonic: when the newest block came

	closeOnce sync.Once
	closeErr  error
}

const (
	docLine    = "line memory"
	docJournal = "journal id"
	queueLen   = 256 // blocks of about 20 ms between source and line: five seconds
)

// Open checks everything and acquires it: files, source, page address. A station that does not open has left nothing
// open.
func Open(o Options) (_ *Station, err error) {
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	log, logged := thin(o.Log.Handler(), time.Now)
	o.Log = log
	s := &Station{o: o, log: log, logged: logged, orders: make(chan *request, ordersWait), ended: make(chan struct{})}
	if s.sk, err = skid.Load(o.SkidFile); err != nil {
		return nil, err
	}
	if err := checkMachine(s.sk); err != nil {
		return nil, err
	}
	if err := os.MkdirAll(o.State, 0o750); err != nil {
		return nil, fmt.Errorf("station: state folder: %w", err)
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, s.release())
		}
	}()
	if s.ledger, err = ledger.Open(filepath.Join(o.State, "state.db"), ledger.Options{Room: ledgerRoom}); err != nil {
		return nil, err
	}
	s.lastAct = s.ledger.Stats().LastAct
	newest, err := s.newestEntry()
	if err != nil {
		return nil, err
	}
	if s.src, s.proc, err = openSource(&o, s.sk, newest); err != nil {
		return nil, err
	}
	if err := s.openPlant(); err != nil {
		return nil, err
	}
	s.info = s.src.Info()
	if err := s.openLine(); err != nil {
		return nil, err
	}
	if err := s.openTape(); err != nil {
		return nil, err
	}
	if !s.info.Start.IsZero() && s.info.Start.Before(newest) {
		// A replay, or a wall clock that was set back while the daemon was down. Delays begin anew, ids keep the order.
		s.log.Warn("the source begins before the newest entry of the journal: times in the journal go back here", "source", s.info.Start, "journal", newest)
		s.desk.say("clock", fmt.Sprintf("this source began at %s, before the newest journal entry of then (%s): order journal entries by id, not by time",
			s.info.Start.UTC().Format(time.RFC3339), newest.UTC().Format(time.RFC3339)))
	}
	if err := s.openEdges(); err != nil {
		return nil, err
	}
	return s, nil
}

// openLine restores what a restart must not forget: alarm states, baseline, learnt windows.
func (s *Station) openLine() error {
	alarms, err := restoreAlarms(s.ledger, AlarmTiming(s.sk))
	if err != nil {
		return err
	}
	base, err := s.baseline()
	if err != nil {
		return err
	}
	plan := LearnPlan{Steady: s.o.Learn, Note: "declared healthy with --learn"}
	s.line, err = NewLine(s.sk, s.info, nil, plan, base, alarms)
	if err != nil && base != nil && s.o.Learn == 0 {
		// A baseline learnt with other features is kept on disk and not used.
		s.log.Warn("the kept baseline does not fit this skid file; declare the machine healthy again with --learn", "err", err)
		s.learning.inForce = 0
		s.line, err = NewLine(s.sk, s.info, nil, plan, nil, alarms)
	}
	if err != nil {
		return err
	}
	s.line.crew = newCrew()
	s.line.reasons = newReasons(len(s.sk.Throws))
	s.gallery = newGallery(len(s.sk.Throws))
	s.line.marked = func(turn int64, at float64) { s.tape.Mark(tape.Mark{Turn: turn, At: at}) }
	if s.o.OnTurn == nil {
		s.line.records = Newest
	}
	var mem Memory
	if ok, err := s.ledger.Doc(docLine, &mem); err != nil {
		return err
	} else if ok {
		if err := s.line.Remember(mem); err != nil {
			s.log.Warn("what the line remembered of before is not used whole", "err", err)
		}
	}
	if err := s.desk.restore(s.ledger, s.line.Alarms(), s.sk.ID); err != nil {
		return err
	}
	return s.resumeLearning()
}

// restoreAlarms gives the alarm points as they stood with the newest transition of the journal.
func restoreAlarms(l *ledger.Ledger, cfg alarm.Config) (*alarm.Annunciator, error) {
	a := alarm.New(cfg)
	var snap alarm.Snapshot
	if ok, err := l.AlarmSnapshot(&snap); err != nil {
		return nil, err
	} else if ok {
		if err := a.Restore(snap); err != nil {
			return nil, err
		}
	}
	a.GoOnAfter(l.Stats().LastJournal)
	return a, nil
}

// newestEntry is the time of the newest entry of the journal; zero when it is empty.
func (s *Station) newestEntry() (time.Time, error) {
	trs, err := s.ledger.Journal(s.ledger.Stats().LastJournal, 1)
	if err != nil || len(trs) == 0 {
		return time.Time{}, err
	}
	return trs[0].At, nil
}

func (s *Station) baseline() (*duty.Baseline, error) {
	var raw json.RawMessage
	info, ok, err := s.ledger.Baseline(0, &raw)
	s.learning.inForce = info.Version
	if err != nil || !ok {
		return nil, err
	}
	b, err := duty.ParseBaseline(raw)
	if err != nil {
		return nil, err
	}
	if b.SkidHash != s.sk.Hash {
		s.log.Warn("the baseline was learnt with another version of the skid file", "baseline", b.Created)
	}
	return b, nil
}

func (s *Station) openEdges() (err error) {
	s.topics = uplink.Topics{Root: s.sk.Uplink.Root, Skid: s.sk.ID}
	if err := s.openRegisters(); err != nil {
		return err
	}
	s.publish(&Output{}, time.Time{})
	broker := s.sk.Uplink.Broker
	if s.o.Broker != "" {
		broker = s.o.Broker
	}
	if broker != "" {
		u := s.sk.Uplink
		if s.o.Broker != "" { // the file's credentials are for the file's broker
			u.UserFile, u.PasswordFile, u.CAFile, u.CertFile, u.KeyFile = "", "", "", "", ""
		}
		id := u.ClientID
		if id == "" {
			id = "lapwing-" + s.sk.ID
		}
		s.pub, err = uplink.New(uplink.Config{Broker: broker, ClientID: id, Topics: s.topics, UserFile: u.UserFile, PasswordFile: u.PasswordFile,
			CAFile: u.CAFile, CertFile: u.CertFile, KeyFile: u.KeyFile, Offline: s.offline, Standing: s.standing, Log: s.log, Commands: s.commands(), Sparkplug: s.sparkplug()}, outbox{s.ledger})
		if err != nil {
			return err
		}
		s.offerHealth() // the first message: or the last will's word would stand until health is due
	}
	listen := s.sk.Panel.Listen
	if s.o.Listen != "" {
		listen = s.o.Listen
	}
	if listen != "" && listen != "none" {
		if s.panel, err = panel.Open(listen, s, s.log); err != nil {
			return err
		}
		s.log.Info("status page", "url", s.panel.URL())
	}
	return nil
}

// PageURL is where the status page is; empty when there is none.
func (s *Station) PageURL() string {
	if s.panel == nil {
		return ""
	}
	return s.panel.URL()
}

// Now is the present snapshot.
func (s *Station) Now() *wire.Now { return s.now.Load() }

// Progress is the number of samples that have passed through the line: it stands still when the line is dead.
func (s *Station) Progress() int64 { return s.progress.Load() }

// parcel is one block on its way to the line, with the process values that begin within it.
type parcel struct {
	block acq.Block
	rows  []row
}

// Run reads the source until it ends or ctx does, and passes everything through the line. It returns nil at the end of
// the source and after a cancelled ctx.
func (s *Station) Run(ctx context.Context) error {
	inner, stop := context.WithCancel(context.WithoutCancel(ctx))
	var edges sync.WaitGroup
	defer func() { s.endOrders(); stop(); edges.Wait() }()
	if s.panel != nil {
		edges.Go(func() {
			if err := s.panel.Serve(); err != nil {
				s.log.Error("status page", "err", err)
			}
		})
		edges.Go(func() { <-inner.Done(); _ = s.panel.Close() })
	}
	if s.registers != nil {
		edges.Go(func() {
			if err := s.registers.Serve(); err != nil {
				s.log.Error("Modbus server", "err", err)
			}
		})
		edges.Go(func() { <-inner.Done(); _ = s.registers.Close() })
	}
	if s.plant != nil {
		edges.Go(func() { s.plant.Run(inner) })
	}
	pubDone := make(chan struct{})
	if s.pub != nil {
		edges.Go(func() { s.pub.Run(inner); close(pubDone) })
	}

	queue := make(chan *parcel, queueLen)
	s.meter.watch(queue)
	srcErr := make(chan error, 1)
	reading, stopReading := context.WithCancel(ctx)
	defer stopReading()
	go func() {
		defer close(queue)
		srcErr <- s.read(reading, queue)
	}()
	lineErr := s.compute(queue)
	edges.Go(func() { s.serveOrders(inner) })
	stopReading()
	for range queue { // a line that gave up must not leave the source waiting
	}
	err := errors.Join(<-srcErr, lineErr)
	if s.pub != nil && ctx.Err() == nil {
		s.drainUplink(5 * time.Second)
	}
	if s.o.AtEnd != nil && ctx.Err() == nil && err == nil {
		s.o.AtEnd(ctx)
	}
	return err
}

// read is the source goroutine: tape first, then the line.
func (s *Station) read(ctx context.Context, queue chan<- *parcel) error {
	var b acq.Block
	var clock rowClock
	var lostHere int64
	var fastFlush int64
	for {
		err := s.src.Read(ctx, &b)
		switch {
		case errors.Is(err, io.EOF):
			return nil
		case ctx.Err() != nil:
			return nil
		case err != nil:
			return fmt.Errorf("station: source: %w", err)
		}
		s.tape.Append(&b)
		p := &parcel{block: cloneBlock(&b), rows: clock.rows(&b, s.info.Rate, s.proc)}
		for _, r := range p.rows {
			s.tape.Process(r.seq, onTape(r.proc))
		}
		p.block.Lost += lostHere
		if s.o.Fast {
			queue <- p
			lostHere = 0
			// The tape never waits for its disk; a source faster than time itself has to.
			if b.Seq0-fastFlush > int64(2*s.info.Rate) {
				fastFlush = b.Seq0
				if err := s.tape.Flush(context.WithoutCancel(ctx)); err != nil {
					s.log.Error("tape", "err", err)
				}
			}
			continue
		}
		select {
		case queue <- p:
			lostHere = 0
		default:
			// The line is behind by the whole queue. The tape has the block; the line sees a gap.
			s.dropped.Add(1)
			lostHere += int64(b.N) + b.Lost
		}
	}
}

func cloneBlock(b *acq.Block) acq.Block {
	c := *b
	flat := make([]int32, b.N*len(b.Counts))
	c.Counts = make([][]int32, len(b.Counts))
	for i := range b.Counts {
		c.Counts[i] = flat[i*b.N : (i+1)*b.N : (i+1)*b.N]
		copy(c.Counts[i], b.Counts[i])
	}
	return c
}

// compute is the one goroutine that owns the line.
func (s *Station) compute(queue <-chan *parcel) error {
	h := newHeld()
	s.line.proc = h.at
	stateless := false
	var failing error // of the last turn: said once when it begins, and at the end if it lasts
	emit := func(o *Output) {
		err := s.meter.kept(func() error { return s.take(o) })
		if err != nil && failing == nil {
			s.log.Error("results cannot be kept; trying again with every turn", "err", err)
		}
		failing = err
	}
	lastHealth := time.Now()
	s.meter.began = lastHealth
	var shown int64
	silent := time.NewTicker(time.Second) // for a source that gives nothing
	defer silent.Stop()
	for {
		var p *parcel
		var more bool
		select {
		case p, more = <-queue:
		case a := <-s.orders:
			s.carryOut(a)
			continue
		case <-silent.C:
			if t := time.Now(); s.silent() >= silentAfter && t.Sub(lastHealth) > s.sk.Uplink.HealthEvery {
				lastHealth = t
				s.offerHealth() // a source that gives nothing is told of too
			}
			if err := s.expire(); err != nil && failing == nil {
				failing = err
				s.log.Error("results cannot be kept; trying again with every turn", "err", err)
			}
			continue
		}
		if !more {
			break
		}
		began := time.Now()
		for _, r := range p.rows {
			h.put(r)
		}
		if err := s.states.note(p.block.Seq0, s.info.Rate, s.sk.Tape.Pre, s.sk, s.line, h); err != nil && !stateless {
			stateless = true // clips without a state are clips all the same
			s.log.Error("clips begin without the state of the line", "err", err)
		}
		s.meter.inStates = time.Since(began)
		if err := s.line.Add(&p.block, emit); err != nil {
			return fmt.Errorf("station: line: %w", err)
		}
		s.overhear(&p.block)
		s.progress.Add(int64(p.block.N))
		end := p.block.Seq0 + int64(p.block.N)
		s.pass(p.block.Seq0, end)
		if end-shown >= int64(s.info.Rate) {
			shown = end // a machine that stands still gives no turns: its snapshot is renewed all the same
			s.publish(&Output{}, s.line.utc(float64(end)/s.info.Rate))
		}
		if t := time.Now(); t.Sub(lastHealth) > s.sk.Uplink.HealthEvery {
			lastHealth = t
			_ = s.meter.kept(func() error {
				s.offerHealth()
				return nil
			})
			if err := s.meter.kept(func() error { return s.ledger.PutDoc(docLine, s.line.Memory()) }); err != nil {
				s.log.Warn("what the line has learnt is not on disk", "err", err)
			}
		}
		s.measured(p.block.N, time.Since(began), h)
	}
	s.offerHealth() // before the flush, which forgets the shaft
	s.showMeasured(h)
	s.line.Flush(emit)
	return failing
}

// pass notes where the sample clock stands.
func (s *Station) pass(from, end int64) {
	if !s.begun {
		s.begun, s.first = true, from
	}
	s.end, s.heard = end, time.Now()
}

// endOrders lets nobody wait for an answer that will not come.
func (s *Station) endOrders() { s.endOnce.Do(func() { close(s.ended) }) }

// Close stops what Run left and writes what must outlive the process. It is safe after a failed Run and twice.
func (s *Station) Close() error {
	s.closeOnce.Do(func() {
		s.endOrders()
		if s.line != nil && s.ledger != nil {
			s.closeErr = s.ledger.PutDoc(docLine, s.line.Memory())
		}
		s.closeErr = errors.Join(s.closeErr, s.release())
	})
	return s.closeErr
}

func (s *Station) release() error {
	var errs []error
	if s.line != nil {
		s.line.crew.close()
		s.line.crew = nil
	}
	if s.panel != nil {
		errs = append(errs, s.panel.Close())
	}
	if s.registers != nil {
		errs = append(errs, s.registers.Close())
	}
	if s.src != nil {
		errs = append(errs, s.src.Close())
	}
	if s.tape != nil {
		errs = append(errs, s.tape.Close())
	}
	if s.ledger != nil {
		errs = append(errs, s.ledger.Close())
	}
	return errors.Join(errs...)
}
