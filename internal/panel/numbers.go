package panel

import (
	"context"
	"fmt"
	"math"
	"net/http"
	"strings"

	"lapwing/internal/wire"
)

// numberTable is a turn of a throw beside what was expected.
type numberTable struct {
	Columns []string
	Rows    []numberRow
	Count   int
	All     []numberLine
}

type numberRow struct {
	Name, Unit string
	Cells      []numberCell
}

type numberCell struct {
	Value, Expected string
	Far             bool
}

type numberLine struct{ Of, Name, Value, Expected, Spread, Off string }

// farOff is how many spreads from what is expected a number is marked. One turn raises nothing: findings are of blocks.
const farOff = 4

// chosen are the measures that stand first: what an analyst looks at before anything else.
var chosen = []struct{ name, words, unit string }{
	{"p_suction_bar_abs", "suction plateau", "bar abs"}, {"p_discharge_bar_abs", "discharge plateau", "bar abs"},
	{"suction_opens_deg", "suction opens", "°"}, {"suction_opens_late_deg", "suction opens late by", "°"}, {"discharge_opens_deg", "discharge opens", "°"}, {"discharge_opens_late_deg", "discharge opens late by", "°"},
	{"n_comp_early", "n, early compression", ""}, {"n_comp_late", "n, late compression", ""}, {"n_exp_early", "n, early expansion", ""}, {"n_exp_late", "n, late expansion", ""},
	{"flow_balance", "flow balance", ""}, {"ve_suction_percent", "volumetric efficiency, suction", "%"}, {"ve_discharge_percent", "volumetric efficiency, discharge", "%"},
	{"capacity_suction_kg_h", "capacity by suction", "kg/h"}, {"capacity_discharge_kg_h", "capacity by discharge", "kg/h"},
	{"indicated_power_kw", "indicated power", "kW"}, {"suction_loss_kw", "suction valve loss", "kW"}, {"discharge_loss_kw", "discharge valve loss", "kW"},
	{"clearance_percent", "clearance by the traces", "%"}, {"t_discharge_c", "discharge temperature", "°C"}, {"t_excess_k", "above the adiabatic", "K"},
	{"power_kw", "power of the throw", "kW"}, {"capacity_kg_h", "capacity of the throw", "kg/h"},
	{"rod_load_max_kn", "rod load, greatest compression", "kN"}, {"rod_load_min_kn", "rod load, greatest tension", "kN"}, {"reversal_deg", "reversal", "°"}, {"reversal_percent", "reversal, lesser peak", "%"},
}

// tabulate arranges the measures of a turn: ends and throw across, the chosen measures down, and all of them in a list.
func tabulate(l *Look) *numberTable {
	if len(l.Measures) == 0 {
		return nil
	}
	t := &numberTable{Count: len(l.Measures)}
	by := map[string]wire.WhyMeasure{}
	seen := map[string]bool{}
	for _, m := range l.Measures {
		by[m.Measure] = m
		of, name := parts(m.Measure)
		seen[of] = true
		t.All = append(t.All, numberLine{Of: of, Name: name, Value: fig(m.Value), Expected: fig(m.Expected), Spread: fig(m.Spread), Off: num(m.Spreads)})
	}
	columns := []string{}
	for _, of := range []string{l.Throw + ".he", l.Throw + ".ce", l.Throw} {
		if seen[of] {
			columns = append(columns, of)
		}
	}
	t.Columns = columns
	for _, c := range chosen {
		row, any := numberRow{Name: c.words, Unit: c.unit}, false
		for _, of := range columns {
			m, ok := by[of+"/"+c.name]
			any = any || ok
			row.Cells = append(row.Cells, cellOf(m))
		}
		if any {
			t.Rows = append(t.Rows, row)
		}
	}
	return t
}

func parts(measure string) (of, name string) {
	i := strings.LastIndex(measure, "/")
	if i < 0 {
		return "", measure
	}
	return measure[:i], measure[i+1:]
}

func cellOf(m wire.WhyMeasure) (c numberCell) {
	if m.Value == nil {
		return c
	}
	c.Value = fig(m.Value)
	if m.Expected == nil {
		return c
	}
	c.Expected = fig(m.Expected)
	if m.Spread != nil && *m.Spread > 0 {
		c.Value, c.Expected = beside(*m.Value, *m.Spread), beside(*m.Expected, *m.Spread)+" ± "+beside(*m.Spread, *m.Spread)
	}
	if m.Spreads != nil {
		c.Expected += ", " + minus(fmt.Sprintf("%+.1f", math.Round(*m.Spreads*10)/10+0))
		c.Far = math.Abs(*m.Spreads) > farOff
	}
	return c
}

// signalWords is a channel's newest second in words.
type signalWords struct{ Lo, Hi, Mean, RMS, Unit, Full, Used string }

func (s *site) channel(r *http.Request, p *sheet) int {
	p.Channel = r.PathValue("channel")
	for i := range p.Health.Channels {
		if p.Health.Channels[i].ID == p.Channel {
			p.Chan = &p.Health.Channels[i]
		}
	}
	sig := s.look.pics.src.Signal(p.Channel)
	if p.Chan == nil && sig == nil {
		return http.StatusNotFound
	}
	if sig == nil {
		ctx, cancel := context.WithTimeout(r.Context(), lookWait)
		defer cancel()
		sig = s.look.newestSignal(ctx, p.Channel)
	}
	p.Title = "Channel " + p.Channel
	if sig == nil || len(sig.V) < 2 {
		return 0
	}
	lo, hi, mean, rms := spread(sig.V)
	f := func(x float64) string { return fig(&x) }
	p.Sig = &signalWords{Lo: f(lo), Hi: f(hi), Mean: f(mean), RMS: f(rms), Unit: sig.Unit, Full: f(sig.Full[0]) + " to " + f(sig.Full[1])}
	p.Sig.Used = fmt.Sprintf("%.0f %%", 100*(hi-lo)/(sig.Full[1]-sig.Full[0]))
	p.ChannelCharts = []picture{{"signal", "Signal, the newest second as sampled", "the newest second of " + p.Channel + " over time"}, {"spectrum", "Spectrum", "spectral density of the same second; the bands in use are shaded"}}
	return 0
}
