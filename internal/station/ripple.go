package station

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"path/filepath"
	"strconv"
	"strings"

	"lapwing/internal/acq"
	"lapwing/internal/acq/wav"
	"lapwing/internal/dsp"
	"lapwing/internal/frame"
	"lapwing/internal/ripple"
	"lapwing/internal/skid"
)

// RippleOptions say which toothed recording to turn into the skid file's ripple.
type RippleOptions struct {
	SkidFile, Recording, ProcessCSV string

	// A temporary wheel beside the phase reference, which then says where the angles count from.
	Wheel string // "60-2", "12+1"; empty: the wheel is the skid file's own phase reference
	Input int    // converter input of its sensor, from 0

	Out io.Writer
}

// Ripple surveys a recording and writes the numbers as lines for the skid file, with what is to be thought of them. No
// harmonics at all is an error.
func Ripple(ctx context.Context, o RippleOptions) error {
	sk, err := skid.Load(o.SkidFile)
	if err != nil {
		return err
	}
	src, err := wav.Open(o.Recording, wav.Options{})
	if err != nil {
		return err
	}
	defer src.Close()
	proc := fixed(sk)
	if o.ProcessCSV != "" {
		if proc, err = readProcess(o.ProcessCSV, sk); err != nil {
			return err
		}
	}
	s, err := newToothSurvey(sk, src.Info(), o)
	if err != nil {
		return err
	}
	s.proc = proc.from(firstSecond(src))
	var b acq.Block
	for {
		if err = src.Read(ctx, &b); err == nil {
			err = s.add(&b)
		}
		if err != nil {
			break
		}
	}
	if err != nil && !errors.Is(err, io.EOF) {
		err = fmt.Errorf("ripple: %w", err)
		if ctx.Err() != nil {
			return err
		}
	} else {
		err = nil
	}
	return errors.Join(s.report(o.Out, filepath.Base(o.Recording)), err) // a damaged recording is used as far as it goes
}

// toothSurvey is a survey under way.
type toothSurvey struct {
	sk     *skid.Skid
	rate   float64
	proc   processAt
	wheel  frame.Wheel
	teeth  *frame.Assembler
	mark   *frame.Assembler // the phase reference beside a temporary wheel; nil: none
	survey *ripple.Survey
	at     []float64 // degrees of all marks of the wheel, 0 first, 360 last
	turns  [][]float64
	marks  []float64 // sample positions of the phase reference
	offset float64   // degrees from the wheel's mark 0 to the phase reference
	seen   int64
}

func newToothSurvey(sk *skid.Skid, info acq.Info, o RippleOptions) (*toothSurvey, error) {
	s := &toothSurvey{sk: sk, rate: info.Rate}
	own := frameConfig(sk, info)
	c := own
	if o.Wheel == "" {
		if s.wheel = own.Wheel; s.wheel.Teeth == 0 {
			return nil, fmt.Errorf("ripple: the skid file's phase reference has one mark a turn, which shows no ripple: name the temporary wheel and its input (--wheel 60-2 --input 7), or give the wheel in the skid file")
		}
	} else {
		var err error
		if s.wheel, err = parseWheel(o.Wheel); err != nil {
			return nil, err
		}
		if o.Input < 0 || o.Input >= info.Channels {
			return nil, fmt.Errorf("ripple: the recording has inputs 0 to %d, not %d", info.Channels-1, o.Input)
		}
		if own.Channel < info.Channels && o.Input != own.Channel {
			if s.mark, err = frame.New(own); err != nil {
				return nil, err
			}
		}
		c = frame.Config{Rate: info.Rate, Inputs: info.Channels, Channel: o.Input, Auto: true, Wheel: s.wheel, MaxRPM: own.MaxRPM}
	}
	var err error
	if s.teeth, err = frame.New(c); err != nil {
		return nil, err
	}
	inner := s.wheel.Angles()
	s.at = append(append([]float64{0}, inner...), 360)
	s.survey, err = ripple.NewSurvey(inner)
	return s, err
}

// parseWheel reads 60-2 and 12+1.
func parseWheel(text string) (frame.Wheel, error) {
	var w frame.Wheel
	var err error
	if a, b, ok := strings.Cut(text, "-"); ok {
		if w.Teeth, err = strconv.Atoi(a); err == nil {
			w.Missing, err = strconv.Atoi(b)
		}
	} else if a, ok := strings.CutSuffix(text, "+1"); ok {
		w.Teeth, err = strconv.Atoi(a)
		w.Extra = true
	} else {
		err = errors.New("no index")
	}
	if err != nil || w.Teeth < 1 {
		return w, fmt.Errorf("ripple: wheel %q: write teeth and missing teeth, 60-2, or teeth and an extra one, 12+1", text)
	}
	if err := w.Check(); err != nil {
		return w, fmt.Errorf("ripple: wheel %q: %w", text, err)
	}
	return w, nil
}

func (s *toothSurvey) add(b *acq.Block) error {
	if s.mark != nil {
		if err := s.mark.Add(b, func(f *frame.Frame) {
			if f.Good() {
				s.marks = append(s.marks, f.Mark0)
			}
		}); err != nil {
			return err
		}
	}
	return s.teeth.Add(b, s.turn)
}

func (s *toothSurvey) turn(f *frame.Frame) {
	s.seen++
	step := noStep
	if p := s.proc(f.Mark0 / s.rate); p.Known {
		step = p.Step
	}
	s.survey.Add(f, step)
	if s.mark != nil && f.Good() && len(f.Inner)+2 == len(s.at) {
		s.turns = append(s.turns, append(append([]float64{f.Mark0}, f.Inner...), f.Mark1))
	}
}

// locate finds the phase reference on the wheel: the median, over all turns, of its angle between the two teeth beside
// it. A quarter of the turns must tell, and they must agree.
func (s *toothSurvey) locate() error {
	var angle []float64
	k := 0
	for _, p := range s.marks {
		for k < len(s.turns) && s.turns[k][len(s.at)-1] <= p {
			k++
		}
		if k == len(s.turns) {
			break
		}
		t := s.turns[k]
		for i := 0; i+1 < len(t); i++ {
			if p >= t[i] && p < t[i+1] {
				a := s.at[i] + (p-t[i])/(t[i+1]-t[i])*(s.at[i+1]-s.at[i])
				if len(angle) > 0 { // on the same lap as the first
					a += 360 * math.Round((angle[0]-a)/360)
				}
				angle = append(angle, a)
			}
		}
	}
	if 4*len(angle) < len(s.turns) || len(angle) == 0 {
		return fmt.Errorf("ripple: the phase reference was found in %d of %d turns: without it nobody knows where the angles count from", len(angle), len(s.turns))
	}
	if spread := dsp.MADToSigma * dsp.MAD(angle); spread > 0.2 {
		return fmt.Errorf("ripple: the phase reference wanders by %.2f° (σ) on the wheel: one of the two does not sit fast or is not read rightly", spread)
	}
	s.offset = math.Mod(dsp.Median(angle)+720, 360)
	return nil
}

func (s *toothSurvey) report(w io.Writer, name string) error {
	s.teeth.Flush(s.turn)
	found := s.survey.Found()
	if len(found) == 0 {
		return fmt.Errorf("ripple: %s: no four whole turns of the %v wheel in a row (%d turns seen): is the input right, and the wheel?", name, s.wheel, s.seen)
	}
	where := "the wheel's mark 0, the first tooth after its index"
	if s.mark != nil {
		if err := s.locate(); err != nil {
			return err
		}
		where = fmt.Sprintf("the phase reference, %.2f° after the wheel's mark 0", s.offset)
	}
	p := &page{w: w}
	p.say("# Ripple from %s, %v wheel, %d marks a turn. Angles count from %s.", name, s.wheel, s.wheel.Marks(), where)
	p.say("# It holds for one mark a turn; a wheel of %d marks or more in service needs none.", manyMarks)
	steps := !(len(found) == 1 && (found[0].Step == noStep || len(s.sk.Steps) == 1))
	if steps {
		p.say("load_steps:")
	} else {
		p.say("phase:")
	}
	doubtful := 0
	for i := range found {
		f := &found[i]
		f.Mean = f.Mean.Moved(s.offset)
		doubts := f.Doubts()
		head, in := "", "  "
		if steps && f.Step == noStep {
			head, in = "  # load step not known:", "  # "
		} else if steps {
			head, in = fmt.Sprintf("  - code: %d", f.Step), "    "
		}
		if head != "" {
			p.say("%s", head)
		}
		p.say("%s# %d turns at %.0f rpm; with these numbers 95 of 100 angles lie within ±%.2f°", in, f.Turns, 60*s.rate/f.Samples, math.Max(f.U(), 0.01))
		p.say("%s# teeth off their places by %.3f° (σ), jitter %.3f° (σ)", in, f.Pitch, f.Jitter)
		for _, d := range doubts {
			p.say("%s# NOT TO BE TRUSTED: %s", in, d)
			doubtful++
		}
		p.say("%sripple:", in)
		for n := 1; n <= f.Orders; n++ {
			if f.Known(n) {
				a := cmplx.Abs(f.Mean[n-1])
				p.say("%s  - {order: %d, amplitude_percent: %.3f, phase_deg: %.1f}  # ±%.3f %%, one turn's scatter %.3f %%", in, n, 100*a,
					cmplx.Phase(f.Mean[n-1])*180/math.Pi, 196*f.Error(n), 100*f.Scatter[n-1])
			}
		}
	}
	p.say("# %s", ripple.Eccentric(found))
	if doubtful > 0 {
		p.say("# Until the doubts are settled, leave the numbers out of the skid file: an unknown ripple is stated, a wrong one is not.")
	}
	return p.err
}

// page is lines for people; the first failure to write stays.
type page struct {
	w   io.Writer
	err error
}

func (p *page) say(format string, args ...any) {
	if p.err == nil {
		_, p.err = fmt.Fprintf(p.w, format+"\n", args...)
	}
}
