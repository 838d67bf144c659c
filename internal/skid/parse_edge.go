package skid

import (
	"fmt"
	"math"
	"net"
	"net/url"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// The defaults of what a file may leave out. The check prints those in use.
const (
	defaultGridDeg    = 0.5
	defaultBlockTurns = 15
	defaultLearnTurns = 600
	defaultTapeGB     = 20
	defaultTapeHours  = 72
	defaultPre        = 60
	defaultPost       = 60
	defaultClipsGB    = 5
	defaultRoot       = "lapwing"
	defaultFeatures   = 10
	defaultHealth     = 30
	defaultListen     = "127.0.0.1:8411"
)

var (
	defaultImpact = [2]float64{2000, 20000}
	defaultLeak   = [2]float64{10000, 20000}
)

func (r *reader) detection(o *object, sk *Skid) {
	d := &sk.Detection
	s := o.section("detection", "grid_deg", "impact_band_hz", "leak_band_hz", "block_turns", "learn_turns")
	d.GridDeg = s.numOr("grid_deg", bounds{0.1, 1}, defaultGridDeg)
	if n := 60 / d.GridDeg; math.Abs(n-math.Round(n)) > 1e-6 { // a turn reaches 60° beyond its dead centres
		s.wrong("grid_deg", "write 0.1, 0.2, 0.25, 0.5 or 1", "60° is not a whole number of steps of %s°", short(d.GridDeg))
	}
	d.ImpactBand = r.band(s, "impact_band_hz", defaultImpact, sk.Rate)
	d.LeakBand = r.band(s, "leak_band_hz", defaultLeak, sk.Rate)
	d.BlockTurns = s.wholeOr("block_turns", 1, 1000, defaultBlockTurns)
	d.LearnTurns = s.wholeOr("learn_turns", 30, 1000000, defaultLearnTurns)
}

func (o *object) wholeOr(key string, lo, hi, def int) int {
	if o != nil && o.has(key) {
		v, _ := o.whole(key, lo, hi, false)
		return v
	}
	return int(o.numOr(key, bounds{float64(lo), float64(hi)}, float64(def)))
}

// band reads [low, high] in Hz; the low edge must lie under half the sampling rate.
func (r *reader) band(s *object, key string, def [2]float64, rate float64) [2]float64 {
	if !s.has(key) {
		if s != nil {
			r.defaulted = append(r.defaulted, fmt.Sprintf("%s = [%s, %s]", join2(s.path, key), short(def[0]), short(def[1])))
		}
		return def
	}
	fix := fmt.Sprintf("write two frequencies: %s: [%s, %s]", key, short(def[0]), short(def[1]))
	items := s.list(key, 2, 2, false, fix)
	if len(items) != 2 {
		return def
	}
	var b [2]float64
	for i, n := range items {
		v, ok := r.number(n, fmt.Sprintf("%s[%d]", join2(s.path, key), i), unit{name: "Hz"})
		if !ok {
			return def
		}
		b[i] = v
	}
	switch {
	case b[0] < 10 || b[1] > 500000 || b[0] >= b[1]:
		s.wrong(key, fix, "%s to %s Hz is no band", short(b[0]), short(b[1]))
	case rate > 0 && b[0] >= rate/2:
		s.wrong(key, "lower the band or raise sampling_hz", "the band begins above half the sampling rate (%s Hz)", short(rate/2))
	}
	return b
}

var measureName = regexp.MustCompile(`^[a-z][a-z0-9_]*$`)

func (r *reader) limits(o *object, sk *Skid) {
	const fix = "list the limits: - {of: t1.he, measure: …, high: …, severity: alert}"
	for i, n := range o.list("limits", 0, 1000, false, fix) {
		path := fmt.Sprintf("limits[%d]", i)
		s := r.object(n, path, "of", "measure", "high", "low", "deadband", "on_delay_s", "off_delay_s", "on_turns", "off_turns", "latch", "unless", "severity")
		if s == nil {
			continue
		}
		any := bounds{-1e12, 1e12}
		l := Limit{High: s.num("high", any, false), Low: s.num("low", any, false)}
		var ok bool
		if l.Subject, ok = s.text("of", nil, "a throw or an end: t1 or t1.he", true); ok && !sk.isSubject(l.Subject) {
			s.wrong("of", "write a throw, an end that works ("+list(sk.subjects())+") or a valve group of one", "there is no %q", clip(l.Subject))
		}
		l.Measure, _ = s.text("measure", measureName, "the name of a measure", true)
		if !s.has("high") && !s.has("low") {
			r.problem(s.at, path, "write high, low or both", "a limit without a bound")
		}
		if l.Low >= l.High {
			s.wrong("low", "low must lie under high", "%s is not under high (%s)", short(l.Low), short(l.High))
		}
		l.Deadband = s.numOr("deadband", bounds{0, 1e12}, 0)
		l.OnDelay = seconds(s.numOr("on_delay_s", bounds{0, 86400}, 10))
		l.OffDelay = seconds(s.numOr("off_delay_s", bounds{0, 86400}, 30))
		l.OnTurns, _ = s.whole("on_turns", 1, 100000, false)
		l.OffTurns, _ = s.whole("off_turns", 1, 100000, false)
		l.Latch = s.choice("latch", "no", "yes", "no") == "yes"
		r.unless(s, &l)
		if s.node("severity", true, "write severity: advisory, alert or danger") != nil {
			l.Severity = s.choice("severity", "", "advisory", "alert", "danger")
		}
		sk.Limits = append(sk.Limits, l)
	}
	sk.ratedLimits()
}

// unless reads the duty states in which a limit is suppressed by design.
func (r *reader) unless(s *object, l *Limit) {
	states := []string{"starting", "changing", "unloaded", "out-of-range"}
	fix := "list some of " + list(states)
	for i, n := range s.list("unless", 1, len(states), false, fix) {
		word, ok := r.word(n, fmt.Sprintf("%s.unless[%d]", s.path, i), nil, fix)
		if ok && (!slices.Contains(states, word) || slices.Contains(l.Unless, word)) {
			s.wrong("unless", fix, "%q is no duty state, or stands twice", clip(word))
		} else if ok {
			l.Unless = append(l.Unless, word)
		}
	}
}

func (sk *Skid) subjects() []string {
	var all []string
	for t, th := range sk.Throws {
		all = append(all, th.ID)
		for e := range th.Ends {
			if th.Ends[e].Works {
				all = append(all, sk.EndName(t, e))
			}
		}
	}
	return all
}

// isSubject accepts a throw, an end that works, or something below one of them (t1.he.suction): whether a measure
// exists there is known to CheckLimits only.
func (sk *Skid) isSubject(name string) bool {
	for _, s := range sk.subjects() {
		if name == s || strings.HasPrefix(name, s+".") {
			return !sk.idleEnd(name)
		}
	}
	return false
}

// idleEnd reports whether a name lies at an end that does not work.
func (sk *Skid) idleEnd(name string) bool {
	for t := range sk.Throws {
		for e := range endIDs {
			n := sk.EndName(t, e)
			if !sk.Throws[t].Ends[e].Works && (name == n || strings.HasPrefix(name, n+".")) {
				return true
			}
		}
	}
	return false
}

// CheckLimits checks the limits against the measures there are: names gives those of one subject (nil: no such
// subject). The error is the joined Problems. It stands apart from Parse because the measures are made from the Skid.
func (sk *Skid) CheckLimits(names func(subject string) []string) error {
	r := &reader{file: sk.File}
	for i, l := range sk.Limits {
		path := fmt.Sprintf("limits[%d]", i)
		if l.From != "" {
			continue // made here, with names that are right
		}
		known := names(l.Subject)
		if len(known) == 0 {
			r.problem(sk.at[path+".of"], path+".of", "subjects are "+list(sk.subjects())+" and what lies below them", "nothing is measured at %q", l.Subject)
			continue
		}
		if !slices.Contains(known, l.Measure) {
			fix := "known here: " + list(known)
			if near := nearest(l.Measure, known); near != "" {
				fix = "did you mean " + near + "?"
			}
			r.problem(sk.at[path+".measure"], path+".measure", fix, "%s has no measure %s", l.Subject, l.Measure)
		}
	}
	return join(r.problems)
}

func (r *reader) tape(o *object, t *Tape) {
	s := o.section("tape", "max_gb", "max_age_h", "pre_s", "post_s", "clips_gb", "thin")
	t.MaxBytes = whole64(s.numOr("max_gb", bounds{0.01, 1e5}, defaultTapeGB) * 1e9)
	t.MaxAge = seconds(3600 * s.numOr("max_age_h", bounds{0.01, 24 * 366}, defaultTapeHours))
	t.Pre = seconds(s.numOr("pre_s", bounds{0, 3600}, defaultPre))
	t.Post = seconds(s.numOr("post_s", bounds{0, 3600}, defaultPost))
	t.ClipBytes = whole64(s.numOr("clips_gb", bounds{0.01, 1e5}, defaultClipsGB) * 1e9)
	if s.has("thin") {
		r.thin(s, t)
	}
}

// thin reads how older samples are thinned out. Times are hours of age, in ascending order.
func (r *reader) thin(o *object, t *Tape) {
	s := o.sub("thin", false, "whole_h", "one_in", "hourly_after_h")
	if s == nil {
		return
	}
	whole := seconds(3600 * s.num("whole_h", bounds{0.01, 24 * 366}, true))
	oneIn, _ := s.whole("one_in", 2, 3600, true)
	t.Thin = Thin{Whole: whole, OneIn: oneIn, Hourly: seconds(3600 * s.num("hourly_after_h", bounds{0.01, 24 * 366}, false))}
	if whole > 0 && whole < 2*t.Pre {
		s.wrong("whole_h", "write at least twice pre_s", "an alarm protects the %s before it, and after %s they are thinned out", t.Pre, whole)
	}
	if h := t.Thin.Hourly; h > 0 && h <= whole {
		s.wrong("hourly_after_h", "write more hours than whole_h, or leave it out", "%s h is not after the %s h that are kept whole", short(h.Hours()), short(whole.Hours()))
	}
}

func whole64(v float64) int64 {
	if math.IsNaN(v) {
		return 0
	}
	return int64(v)
}

func (r *reader) uplink(o *object, sk *Skid) {
	u := &sk.Uplink
	s := o.section("uplink", "broker", "root", "client_id", "user_file", "password_file", "ca_file", "cert_file", "key_file",
		"features_every_s", "health_every_s", "commands", "dialect", "sparkplug")
	if s == nil {
		return
	}
	if raw, ok := s.text("broker", nil, "tcp://host:1883 or tls://host:8883", false); ok {
		u.Broker = raw
		r.broker(s, raw)
	}
	u.Root = defaultRoot
	if root, ok := s.text("root", topic, "a topic of letters, digits, '_', '-' and '/'", false); ok {
		u.Root = root
	} else if !s.has("root") {
		r.defaulted = append(r.defaulted, "uplink.root = "+defaultRoot)
	}
	u.ClientID = "lapwing-" + sk.ID
	if id, ok := s.text("client_id", inputID, "a short name of letters, digits, '_', '-' and '.'", false); ok {
		u.ClientID = id
	} else if !s.has("client_id") {
		r.defaulted = append(r.defaulted, "uplink.client_id = "+u.ClientID)
	}
	for _, f := range []struct {
		key string
		to  *string
	}{{"user_file", &u.UserFile}, {"password_file", &u.PasswordFile}, {"ca_file", &u.CAFile}, {"cert_file", &u.CertFile}, {"key_file", &u.KeyFile}} {
		*f.to, _ = s.text(f.key, nil, "the path of a file that holds it", false)
	}
	if (u.CertFile == "") != (u.KeyFile == "") {
		s.r.problem(s.at, s.path, "write cert_file and key_file, or neither", "half of a client certificate")
	}
	u.FeaturesEvery = seconds(s.numOr("features_every_s", bounds{1, 86400}, defaultFeatures))
	u.HealthEvery = seconds(s.numOr("health_every_s", bounds{1, 86400}, defaultHealth))
	r.commands(s, u)
	r.dialect(s, sk)
}

func (r *reader) broker(s *object, raw string) {
	const fix = "write tcp://host:1883 or tls://host:8883"
	u, err := url.Parse(raw)
	switch {
	case err != nil || u.Hostname() == "":
		s.wrong("broker", fix, "not the address of a broker")
	case u.User != nil:
		s.wrong("broker", "put user and password into files and write user_file and password_file", "a secret does not belong into the skid file")
	case u.Scheme != "tcp" && u.Scheme != "tls":
		s.wrong("broker", fix, "the scheme %q is not known", clip(u.Scheme))
	case u.Port() == "":
		s.wrong("broker", fix, "the port is missing")
	case strings.Trim(u.Path, "/") != "" || u.RawQuery != "" || u.Fragment != "":
		s.wrong("broker", fix, "nothing may follow the port")
	}
}

func (r *reader) panel(o *object, p *Panel) {
	s := o.section("panel", "listen")
	if s == nil {
		return
	}
	if !s.has("listen") {
		p.Listen = defaultListen
		r.defaulted = append(r.defaulted, "panel.listen = "+defaultListen)
		return
	}
	v, ok := s.text("listen", nil, "host:port, or none for no page", false)
	if !ok || v == "none" {
		return
	}
	_, port, err := net.SplitHostPort(v)
	if n, perr := strconv.Atoi(port); err != nil || perr != nil || n < 0 || n > 65535 {
		s.wrong("listen", "write host:port (127.0.0.1:8411), or none for no page", "%q is no address to listen on", clip(v))
		return
	}
	p.Listen = v
}

// tapeHours is how far back the tape reaches by its size at the stated rate, and until when it is whole: 3 bytes a sample
// uncompressed, which is what a 24-bit converter fills before packing. 0: the rate is not known.
func (sk *Skid) tapeHours() (whole, back float64) {
	if sk.Rate <= 0 || len(sk.Channels) == 0 {
		return 0, 0
	}
	const bytesPerSample = 3
	perSecond := sk.Rate * float64(len(sk.Channels)) * bytesPerSample
	full := float64(sk.Tape.MaxBytes) / perSecond / 3600
	h := sk.Tape.Thin
	if h.OneIn == 0 || full <= h.Whole.Hours() {
		return full, full
	}
	const hourly = 1. / 60
	share := 1 / float64(h.OneIn)
	if h.Hourly == 0 {
		return h.Whole.Hours(), h.Whole.Hours() + (full-h.Whole.Hours())/share
	}
	share += hourly * (1 - share) // the minutes that stay for good are kept from the beginning
	thin := math.Min((full-h.Whole.Hours())/share, h.Hourly.Hours()-h.Whole.Hours())
	return h.Whole.Hours(), h.Whole.Hours() + thin + (full-h.Whole.Hours()-thin*share)/hourly
}
