package panel

import (
	"context"
	"errors"
	"log/slog"
	"math"
	"net/http"
	"slices"
	"strconv"
	"strings"
	"time"

	"lapwing/internal/chart"
	"lapwing/internal/wire"
)

// router is what routes are told to.
type router interface {
	HandleFunc(pattern string, handler func(http.ResponseWriter, *http.Request))
}

// looking serves
//
//	GET /api/v1/throws                        the throws of the machine
//	GET /api/v1/throws/{throw}/look           one turn as numbers over crank angle; turn: one that was looked at of late
//	GET /api/v1/throws/{throw}/charts/{file}  angle, pv, logpv or load as .svg, .png, .pdf, or .json: where its panels lie;
//	                                          turn, reference (clip or a turn), theme (paper, night), size (screen, narrow)
//	GET /api/v1/channels/{channel}/signal     the newest second in numbers
//	GET /api/v1/channels/{channel}/charts/{file}  signal or spectrum
type looking struct {
	pics *pictures
	log  *slog.Logger
}

func (a *looking) routes(mux router) {
	mux.HandleFunc("GET /api/v1/throws", func(w http.ResponseWriter, r *http.Request) { sendJSON(w, list(a.pics.src.Throws()), a.log) })
	mux.HandleFunc("GET /api/v1/throws/{throw}/look", a.look)
	mux.HandleFunc("GET /api/v1/throws/{throw}/charts/{file}", a.throwChart)
	mux.HandleFunc("GET /api/v1/channels/{channel}/signal", a.signal)
	mux.HandleFunc("GET /api/v1/channels/{channel}/charts/{file}", a.channelChart)
}

// turnOf reads the turn out of a query; 0: the newest.
func turnOf(s string) (int64, error) {
	if s == "" {
		return 0, nil
	}
	n, err := strconv.ParseInt(s, 10, 64)
	if err != nil || n < 0 {
		return 0, errors.New("turn: a whole number")
	}
	return n, nil
}

func (a *looking) knows(throw string) bool {
	return slices.ContainsFunc(a.pics.src.Throws(), func(t Throw) bool { return t.ID == throw })
}

// refuse answers an error in the way that fits it.
func (a *looking) refuse(w http.ResponseWriter, err error) {
	switch {
	case errors.Is(err, errTurnGone), errors.Is(err, ErrNoReference):
		http.Error(w, err.Error(), http.StatusNotFound)
	case errors.Is(err, errNoPicture):
		w.Header().Set("Retry-After", "2")
		http.Error(w, err.Error(), http.StatusServiceUnavailable)
	case errors.Is(err, context.Canceled), errors.Is(err, context.DeadlineExceeded):
		http.Error(w, "took too long", http.StatusServiceUnavailable)
	default:
		a.log.Debug("panel: picture", "err", err)
		http.Error(w, err.Error(), http.StatusUnprocessableEntity)
	}
}

func (a *looking) look(w http.ResponseWriter, r *http.Request) {
	turn, err := turnOf(r.URL.Query().Get("turn"))
	switch {
	case err != nil:
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	case !a.knows(r.PathValue("throw")):
		http.Error(w, "no such throw", http.StatusNotFound)
		return
	}
	l, err := a.pics.look(r.Context(), r.PathValue("throw"), turn)
	if err != nil {
		a.refuse(w, err)
		return
	}
	sendJSON(w, numbers(l), a.log)
}

// parseDrawing reads what is to be drawn how.
func parseDrawing(r *http.Request, kinds []string) (of drawingOf, areas bool, err error) {
	kind, ending, _ := strings.Cut(r.PathValue("file"), ".")
	of = drawingOf{kind: kind, format: chart.Format(ending), size: r.URL.Query().Get("size"), reference: r.URL.Query().Get("reference")}
	if areas = ending == "json"; areas {
		of.format = chart.SVG
	}
	switch {
	case !slices.Contains(kinds, kind):
		return of, areas, errors.New("no such chart: " + strings.Join(kinds, ", "))
	case of.format != chart.SVG && of.format != chart.PNG && of.format != chart.PDF:
		return of, areas, errors.New("no such format: svg, png, pdf, and json for where the panels lie")
	case of.size != "" && of.size != "screen" && of.size != "narrow":
		return of, areas, errors.New("size: screen or narrow")
	}
	switch r.URL.Query().Get("theme") {
	case "", "paper":
	case "night":
		of.theme = chart.Night
	default:
		return of, areas, errors.New("theme: paper or night")
	}
	return of, areas, nil
}

var mediaTypes = map[chart.Format]string{chart.SVG: "image/svg+xml", chart.PNG: "image/png", chart.PDF: "application/pdf"}

func (a *looking) send(w http.ResponseWriter, r *http.Request, d *drawn, areas bool, name string) {
	if areas {
		sendJSON(w, d.areas, a.log)
		return
	}
	w.Header().Set("Content-Type", mediaTypes[d.of.format])
	if r.URL.Query().Has("download") {
		w.Header().Set("Content-Disposition", `attachment; filename="`+fileName(name)+"."+string(d.of.format)+`"`)
	}
	_, _ = w.Write(d.bytes)
}

// fileName keeps letters, digits and dashes.
func fileName(s string) string {
	return strings.Map(func(c rune) rune {
		if c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '-' || c == '_' {
			return c
		}
		return '-'
	}, s)
}

func (a *looking) throwChart(w http.ResponseWriter, r *http.Request) {
	of, areas, err := parseDrawing(r, kinds)
	var turn int64
	if err == nil {
		turn, err = turnOf(r.URL.Query().Get("turn"))
	}
	of.throw = r.PathValue("throw")
	switch {
	case err != nil:
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	case !a.knows(of.throw):
		http.Error(w, "no such throw", http.StatusNotFound)
		return
	}
	now, err := a.pics.look(r.Context(), of.throw, turn)
	if err != nil {
		a.refuse(w, err)
		return
	}
	var reference *Look
	switch n, bad := turnOf(of.reference); {
	case of.reference == "clip":
		_ = http.NewResponseController(w).SetWriteDeadline(time.Now().Add(time.Minute)) // the line runs over the clip; a recorder in a test has none
		reference, err = a.pics.src.Reference(r.Context(), of.throw)
	case of.reference == "":
	case bad != nil || n == 0:
		http.Error(w, "reference: clip, or the number of a turn that was looked at of late", http.StatusBadRequest)
		return
	default:
		reference, err = a.pics.look(r.Context(), of.throw, n)
	}
	if err != nil {
		a.refuse(w, err)
		return
	}
	if of.turn = now.Turn; reference != nil {
		of.reference += " " + reference.At.String()
	}
	d, err := a.pics.throwChart(r.Context(), of, now, reference)
	if err != nil {
		a.refuse(w, err)
		return
	}
	a.send(w, r, d, areas, of.throw+"-"+of.kind+"-turn-"+strconv.FormatInt(now.Turn, 10))
}

// newestSignal waits a little for a channel that nobody has looked at.
func (a *looking) newestSignal(ctx context.Context, channel string) *Signal {
	for end := time.Now().Add(lookWait); ; {
		s := a.pics.src.Signal(channel)
		if s != nil && len(s.V) > 1 || !time.Now().Before(end) {
			return s
		}
		select {
		case <-ctx.Done():
			return nil
		case <-time.After(50 * time.Millisecond):
		}
	}
}

func (a *looking) signalOf(w http.ResponseWriter, r *http.Request) *Signal {
	s := a.newestSignal(r.Context(), r.PathValue("channel"))
	if s == nil || len(s.V) < 2 {
		w.Header().Set("Retry-After", "2")
		http.Error(w, "there is no such channel, or nothing of it has come yet", http.StatusServiceUnavailable)
		return nil
	}
	return s
}

func (a *looking) signal(w http.ResponseWriter, r *http.Request) {
	s := a.signalOf(w, r)
	if s == nil {
		return
	}
	lo, hi, mean, rms := spread(s.V)
	sendJSON(w, struct {
		Channel string    `json:"channel"`
		Kind    string    `json:"kind"`
		Unit    string    `json:"unit"`
		Rate    float64   `json:"rate_hz"`
		Sample  int64     `json:"first_sample"`
		At      time.Time `json:"end_at"`
		Lo      float64   `json:"lowest"`
		Hi      float64   `json:"highest"`
		Mean    float64   `json:"mean"`
		RMS     float64   `json:"rms_about_mean"`
		Full    series    `json:"converter_range"`
		V       series    `json:"values"`
	}{s.Channel, s.Kind, s.Unit, s.Rate, s.Seq0, s.At.UTC(), lo, hi, mean, rms, s.Full[:], s.V}, a.log)
}

func (a *looking) channelChart(w http.ResponseWriter, r *http.Request) {
	of, areas, err := parseDrawing(r, []string{"signal", "spectrum"})
	if err != nil {
		http.Error(w, err.Error(), http.StatusBadRequest)
		return
	}
	s := a.signalOf(w, r)
	if s == nil {
		return
	}
	of.throw, of.turn, of.reference = "channel "+s.Channel, s.Seq0, ""
	d, err := a.pics.channelChart(r.Context(), of, s)
	if err != nil {
		a.refuse(w, err)
		return
	}
	a.send(w, r, d, areas, s.Channel+"-"+of.kind)
}

// series writes numbers in five figures; what is not known is null.
type series []float64

// MarshalJSON implements json.Marshaler.
func (s series) MarshalJSON() ([]byte, error) {
	b := make([]byte, 0, 8*len(s)+2)
	b = append(b, '[')
	for i, v := range s {
		if i > 0 {
			b = append(b, ',')
		}
		if math.IsNaN(v) || math.IsInf(v, 0) {
			b = append(b, "null"...)
			continue
		}
		b = strconv.AppendFloat(b, v, 'g', 5, 64)
	}
	return append(b, ']'), nil
}

func scaled(v []float64, k float64) series {
	out := make(series, len(v))
	for i := range v {
		out[i] = v[i] * k
	}
	return out
}

// lookJSON is one turn of one throw over crank angle, in people's units.
type lookJSON struct {
	Throw    string            `json:"throw"`
	Turn     int64             `json:"turn"`
	At       time.Time         `json:"at"`
	About    string            `json:"about"`
	From     float64           `json:"from_deg"` // point i lies at from_deg + i·step_deg
	Step     float64           `json:"step_deg"`
	Ends     []lookEnd         `json:"ends"`
	Vib      []lookVib         `json:"vibration"`
	Load     *lookLoad         `json:"rod_load,omitempty"`
	Measures []wire.WhyMeasure `json:"measures"`
	Against  string            `json:"why_nothing_is_expected,omitempty"`
}

type lookEnd struct {
	End     string       `json:"end"`
	State   string       `json:"state"`
	P       series       `json:"p_bar_abs"`
	V       series       `json:"v_litres"`
	Windows []lookWindow `json:"windows"`
}

type lookWindow struct {
	Event    string   `json:"event"`
	Low      *float64 `json:"low_deg,omitempty"`
	High     *float64 `json:"high_deg,omitempty"`
	Angle    *float64 `json:"angle_deg,omitempty"`
	Expected *float64 `json:"expected_deg,omitempty"`
	Found    bool     `json:"found"` // on this turn; else moved by the model
	Shared   bool     `json:"shared,omitempty"`
}

type lookVib struct {
	Channel string `json:"channel"`
	Peak    series `json:"peak_g"`
}

type lookLoad struct {
	Gas series `json:"gas_kn"`
	Pin series `json:"pin_kn"`
}

func known(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	x = math.Round(x*100) / 100
	return &x
}

func numbers(l *Look) lookJSON {
	c := &l.Picture
	out := lookJSON{Throw: l.Throw, Turn: l.Turn, At: l.At, About: c.About, From: c.Lo, Step: c.Step, Ends: []lookEnd{}, Vib: []lookVib{}, Measures: list(l.Measures), Against: l.Against}
	for e, end := range c.Ends {
		if end == nil {
			continue
		}
		j := lookEnd{End: wire.EndNames[e], State: end.State, P: scaled(end.P, 1e-5), V: scaled(end.V, 1e3), Windows: []lookWindow{}}
		for _, ev := range end.Events {
			name := "discharge"
			if ev.Suction {
				name = "suction"
			}
			if name += ".closes"; ev.Opens {
				name = strings.TrimSuffix(name, "closes") + "opens"
			}
			j.Windows = append(j.Windows, lookWindow{Event: name, Low: known(ev.Lo), High: known(ev.Hi), Angle: known(ev.Angle), Expected: known(ev.Expected), Found: ev.Sure, Shared: ev.Shared})
		}
		out.Ends = append(out.Ends, j)
	}
	for i := range c.Vib {
		out.Vib = append(out.Vib, lookVib{c.Vib[i].Channel, scaled(c.Vib[i].Peak, 1/9.80665)})
	}
	if c.Load != nil {
		out.Load = &lookLoad{scaled(c.Load.Gas, 1e-3), scaled(c.Load.Pin, 1e-3)}
	}
	return out
}
