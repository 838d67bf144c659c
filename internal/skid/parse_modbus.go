package skid

import (
	"fmt"
	"math"
	"net"
	"net/netip"
	"net/url"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"

	"lapwing/internal/crank"
)

// The defaults of the Modbus section.
const (
	defaultTimeoutTCP = 1000 // ms
	defaultTimeoutRTU = 300
	defaultEvery      = 1   // s
	defaultMaxAge     = 5   // s
	mostMaxAge        = 20  // s, of what says the duty: the line does not go by values older than 30 s, and is asked once a second
	mostMaxAgeT       = 600 // s, of temperatures
	mostDevices       = 32
	mostTags          = 500 // of one device
)

var (
	deviceID   = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9_.-]{0,31}$`)
	stageValue = regexp.MustCompile(`^stage([1-9][0-9]?)\.(p_suction|p_discharge|t_suction|t_discharge)$`)
	serialPath = regexp.MustCompile(`^/dev/[A-Za-z0-9_./:-]{1,80}$`)
)

const (
	valueRule = "load_step, stage1.p_suction, stage1.p_discharge, stage1.t_suction, stage1.t_discharge, t1.he.s1.cover or the process tag of a cover"
	urlFix    = "write tcp://host:502, tcp+tls://host:802, rtuovertcp://host:port for a serial server, or rtu:///dev/ttyS0 with baud, parity and stop_bits beside it"
	tagFix    = "list the tags: - {value: stage1.p_suction, function: 3, address: 0, type: f32, unit: bar_abs}"
)

func (r *reader) modbus(o *object, sk *Skid) {
	s := o.sub("modbus", false, "devices", "server")
	if s == nil {
		return
	}
	given, names := map[string]string{}, map[string]bool{}
	for i, n := range s.list("devices", 1, mostDevices, false, "list the devices: - {name: plc, url: tcp://192.0.2.10:502, unit: 1, tags: […]}") {
		d := r.device(sk, n, fmt.Sprintf("modbus.devices[%d]", i), given)
		if d == nil {
			continue
		}
		if names[d.Name] && d.Name != "" {
			r.problem(r.at[fmt.Sprintf("modbus.devices[%d].name", i)], fmt.Sprintf("modbus.devices[%d].name", i), "give each device its own name", "another device is called %s", d.Name)
		}
		names[d.Name] = true
		for k := range sk.Modbus.Devices {
			if e := &sk.Modbus.Devices[k]; e.URL == d.URL && d.URL != "" && (e.Baud != d.Baud || e.Parity != d.Parity || e.StopBits != d.StopBits || e.DataBits != d.DataBits || e.CAFile != d.CAFile || e.CertFile != d.CertFile || e.KeyFile != d.KeyFile) {
				r.problem(place(n), fmt.Sprintf("modbus.devices[%d]", i), "give both the same", "%s is on the line of %s with other line settings or certificates", d.Name, e.Name)
			}
		}
		sk.Modbus.Devices = append(sk.Modbus.Devices, *d)
	}
	if s.has("server") {
		r.modbusServer(s, sk)
	}
}

func (r *reader) device(sk *Skid, n *yaml.Node, path string, given map[string]string) *ModbusDevice {
	s := r.object(n, path, "name", "url", "unit", "baud", "data_bits", "stop_bits", "parity", "timeout_ms", "every_s", "worst_answer_ms",
		"ca_file", "cert_file", "key_file", "canary", "heartbeat", "tags")
	if s == nil {
		return nil
	}
	d := &ModbusDevice{}
	d.Name, _ = s.text("name", deviceID, "a short name of letters, digits, '_', '-' and '.'", true)
	serial := false
	if raw, ok := s.text("url", nil, urlFix, true); ok {
		d.URL, serial = r.deviceURL(s, raw, d)
	}
	d.Unit = s.wholeOr("unit", 0, 255, 1)
	if serial && d.Unit == 0 || d.Unit > 247 && serial {
		s.wrong("unit", "write the device's unit, 1 to 247", "unit %d is nobody's on a serial line", d.Unit)
	}
	def := float64(defaultTimeoutTCP)
	if strings.HasPrefix(d.URL, "rtu:") {
		def = defaultTimeoutRTU
	}
	ms := s.numOr("timeout_ms", bounds{20, 10000}, def)
	d.Timeout = seconds(ms / 1e3)
	d.Every = seconds(s.numOr("every_s", bounds{0.1, 600}, defaultEvery))
	if serial {
		d.WorstAnswer = seconds(s.numOr("worst_answer_ms", bounds{20, 60000}, 2*zero(ms)) / 1e3)
	} else if s.has("worst_answer_ms") {
		s.wrong("worst_answer_ms", "delete it", "this belongs to a serial line: over tcp each answer carries the number of its question")
	}
	r.certificates(s, d)
	if s.has("canary") {
		d.Canary = r.canary(s)
	}
	if s.has("heartbeat") {
		d.Heartbeat = r.heartbeat(s, d)
	}
	for i, n := range s.list("tags", 1, mostTags, true, tagFix) {
		t := r.tag(sk, n, fmt.Sprintf("%s.tags[%d]", path, i), d)
		if t == nil {
			continue
		}
		if before, double := given[t.Value]; double {
			r.problem(place(n), fmt.Sprintf("%s.tags[%d].value", path, i), "keep one", "%s is given by %s already", t.Value, before)
			continue
		}
		given[t.Value] = fmt.Sprintf("%s.tags[%d]", path, i)
		d.Tags = append(d.Tags, *t)
	}
	return d
}

// deviceURL checks the address and gives it in one spelling; line settings stand beside it or as ?baud=… behind it.
func (r *reader) deviceURL(s *object, raw string, d *ModbusDevice) (to string, serial bool) {
	u, err := url.Parse(raw)
	if err != nil || u.Fragment != "" || u.User != nil {
		s.wrong("url", urlFix, "%q is no address of a device", clip(raw))
		return "", false
	}
	switch u.Scheme {
	case "rtu":
		if u.Host != "" || !serialPath.MatchString(u.Path) || strings.Contains(u.Path, "..") {
			s.wrong("url", "write rtu:///dev/ttyS0, with three strokes", "%q is no serial line", clip(raw))
			return "", true
		}
		d.Baud = s.wholeOr("baud", 300, 4000000, r.lineSetting(s, u, "baud", 19200))
		d.DataBits = s.wholeOr("data_bits", 7, 8, 8)
		d.Parity = s.choice("parity", "none", "none", "even", "odd")
		stop := 1
		if d.Parity == "none" {
			stop = 2 // Modbus over serial line V1.02, 2.5.1: eleven bits a character in any case
		}
		d.StopBits = s.wholeOr("stop_bits", 1, 2, stop)
		for k := range u.Query() {
			if k != "baud" {
				s.wrong("url", "write data_bits, parity and stop_bits as keys beside url", "%q in the address is not known", clip(k))
			}
		}
		return "rtu://" + u.Path, true
	case "tcp", "tcp+tls", "rtuovertcp":
		port, perr := strconv.Atoi(u.Port())
		if u.Hostname() == "" || perr != nil || port < 1 || port > 65535 || strings.Trim(u.Path, "/") != "" || u.RawQuery != "" {
			s.wrong("url", urlFix, "%q is no host and port", clip(raw))
			return "", u.Scheme == "rtuovertcp"
		}
		for _, k := range []string{"baud", "data_bits", "parity", "stop_bits"} {
			if s.has(k) {
				s.wrong(k, "delete it", "this belongs to a serial line of this computer (rtu://)")
			}
		}
		return u.Scheme + "://" + u.Host, u.Scheme == "rtuovertcp"
	}
	s.wrong("url", urlFix, "the scheme %q is not known", clip(u.Scheme))
	return "", false
}

func (r *reader) lineSetting(s *object, u *url.URL, key string, def int) int {
	v := u.Query().Get(key)
	if v == "" {
		return def
	}
	n, err := strconv.Atoi(v)
	if err != nil || n < 300 || n > 4000000 {
		s.wrong("url", "write the line's speed, e.g. ?baud=9600", "%q is no speed of a line", clip(v))
		return def
	}
	return n
}

func (r *reader) certificates(s *object, d *ModbusDevice) {
	for _, f := range []struct {
		key string
		to  *string
	}{{"ca_file", &d.CAFile}, {"cert_file", &d.CertFile}, {"key_file", &d.KeyFile}} {
		*f.to, _ = s.text(f.key, nil, "the path of a file that holds it (PEM)", false)
		switch tls := strings.HasPrefix(d.URL, "tcp+tls:"); {
		case tls && *f.to == "" && !s.has(f.key):
			s.r.problem(s.at, join2(s.path, f.key), "write ca_file, cert_file and key_file: Modbus over TLS has certificates on both sides", "missing")
		case !tls && s.has(f.key) && d.URL != "":
			s.wrong(f.key, "write tcp+tls:// if the device speaks TLS, or delete it", "the address is not one of TLS")
		}
	}
}

// register reads function, address, type and order.
func (r *reader) register(s *object) (g Register, ok bool) {
	g.Function, _ = s.whole("function", 1, 4, true)
	addr, haveAddr := s.whole("address", 0, 65535, true)
	g.Address = addr
	bit := g.Function == 1 || g.Function == 2
	def := "u16"
	if bit {
		def = "bool"
	}
	g.Type = s.choice("type", def, "bool", "u16", "i16", "u32", "i32", "u64", "f32", "f64")
	g.Order = s.choice("order", "abcd", "abcd", "cdab", "badc", "dcba")
	switch {
	case bit && g.Type != "bool":
		s.wrong("type", "write type: bool, or function: 3 or 4", "functions 1 and 2 read single bits")
		return g, false
	case !bit && g.Function != 0 && g.Type == "bool":
		s.wrong("type", "write function: 1 or 2, or a type of a register", "functions 3 and 4 read registers")
		return g, false
	case haveAddr && g.Address+g.Words() > 65536:
		s.wrong("address", "addresses are those on the wire and count from 0", "%d registers from %d on reach beyond 65535", g.Words(), g.Address)
		return g, false
	}
	return g, haveAddr && g.Function != 0
}

func (r *reader) canary(o *object) *ModbusCanary {
	s := o.sub("canary", false, "function", "address", "type", "order", "is")
	if s == nil {
		return nil
	}
	g, ok := r.register(s)
	is := s.num("is", bounds{-math.MaxFloat64, math.MaxFloat64}, true)
	if !ok || math.IsNaN(is) {
		return nil
	}
	return &ModbusCanary{g, is}
}

func (r *reader) heartbeat(o *object, d *ModbusDevice) *ModbusBeat {
	s := o.sub("heartbeat", false, "function", "address", "type", "order", "within_s")
	if s == nil {
		return nil
	}
	g, ok := r.register(s)
	within := s.numOr("within_s", bounds{0.2, 600}, math.Max(defaultMaxAge, 3*d.Every.Seconds()))
	if least := d.Every + d.Timeout; within <= least.Seconds() {
		s.wrong("within_s", fmt.Sprintf("write more than %s s (every_s and timeout_ms of the device)", short(least.Seconds())), "it is not read often enough to be seen moving within %s s", short(within))
	}
	if !ok || math.IsNaN(within) {
		return nil
	}
	return &ModbusBeat{g, seconds(within)}
}

func (r *reader) tag(sk *Skid, n *yaml.Node, path string, d *ModbusDevice) *ModbusTag {
	s := r.object(n, path, "value", "function", "address", "type", "order", "scale", "offset", "unit", "min", "max", "max_age_s")
	if s == nil {
		return nil
	}
	t := &ModbusTag{}
	var ok bool
	t.Register, ok = r.register(s)
	t.Scale, t.Offset = 1, 0
	if s.has("scale") {
		if t.Scale = s.num("scale", bounds{-1e12, 1e12}, false); t.Scale == 0 {
			s.wrong("scale", "write what one count is worth", "a scale of 0 makes every value alike")
		}
	}
	if s.has("offset") {
		t.Offset = s.num("offset", bounds{-1e12, 1e12}, false)
	}
	name, named := s.text("value", nil, valueRule, true)
	if !named || !r.plantValue(s, sk, name, t) {
		return nil
	}
	if t.Type == "bool" && t.What != PlantLoadStep {
		s.wrong("value", "read a pressure or temperature from a register", "a single bit can only give a load step")
		return nil
	}
	def, most := unitsOf(t.What, sk.Machine.Atmosphere)
	if !r.tagUnit(s, t, def) {
		return nil
	}
	lo, hi := bound(t.What)
	t.Min, t.Max = lo, hi
	si := func(v float64) float64 { return v*t.Factor + t.Shift }
	wide := bounds{(lo - t.Shift) / t.Factor, (hi - t.Shift) / t.Factor}
	if s.has("min") {
		t.Min = si(s.num("min", wide, false))
	}
	if s.has("max") {
		t.Max = si(s.num("max", wide, false))
	}
	if t.Min >= t.Max {
		s.wrong("max", "max must exceed min", "no value is believed")
	}
	t.MaxAge = seconds(math.Min(most, math.Max(defaultMaxAge, 3*d.Every.Seconds())))
	if s.has("max_age_s") {
		t.MaxAge = seconds(s.num("max_age_s", bounds{0.2, most}, false))
	}
	if least := d.Every + d.Timeout; t.MaxAge > 0 && t.MaxAge <= least {
		s.wrong("max_age_s", fmt.Sprintf("write more than %s s (every_s and timeout_ms of the device), or read more often", short(least.Seconds())), "a value is too old after %s, before the next can have come", t.MaxAge)
	}
	if !ok {
		return nil
	}
	return t
}

// plantValue finds what a tag gives.
func (r *reader) plantValue(s *object, sk *Skid, name string, t *ModbusTag) bool {
	if name == "load_step" {
		t.Value, t.What = name, PlantLoadStep
		return true
	}
	if m := stageValue.FindStringSubmatch(name); m != nil {
		n, _ := strconv.Atoi(m[1])
		if n > sk.Stages() {
			s.wrong("value", "stages count from 1", "the machine has no stage %d", n)
			return false
		}
		t.Value, t.Stage = name, n-1
		t.What = map[string]PlantQuantity{"p_suction": PlantSuctionPressure, "p_discharge": PlantDischargePressure, "t_suction": PlantSuctionTemperature, "t_discharge": PlantDischargeTemperature}[m[2]]
		return true
	}
	var known []string
	for i := range sk.Throws {
		for _, e := range [2]int{crank.HE, crank.CE} {
			end := &sk.Throws[i].Ends[e]
			for _, v := range slices.Concat(end.Suction, end.Discharge) {
				if v.Cover != "" && (name == v.Cover || name == v.ID+".cover") {
					t.Value, t.What, t.Valve = v.ID+".cover", PlantCover, v.ID
					return true
				}
				if name == v.ID+".cover" {
					s.wrong("value", "give the valve its process tag under covers", "no cover temperature is named at %s", v.ID)
					return false
				}
				if v.Cover != "" {
					known = append(known, v.Cover)
				}
			}
		}
	}
	fix := "write " + valueRule
	if near := nearest(name, append(known, "load_step", "stage1.p_suction", "stage1.p_discharge", "stage1.t_suction", "stage1.t_discharge")); near != "" {
		fix = "did you mean " + near + "?"
	}
	s.wrong("value", fix, "%q is no process value", clip(name))
	return false
}

// tagUnits are what a tag's number may be in: SI = number·factor + shift.
type tagUnits struct {
	name          string
	factor, shift float64
}

// unitsOf gives the units of a quantity and how old it may be at most, s.
func unitsOf(q PlantQuantity, atm float64) (all []tagUnits, maxAge float64) {
	const psi = 6894.757293168
	switch q {
	case PlantLoadStep:
		return []tagUnits{{"code", 1, 0}}, mostMaxAge
	case PlantSuctionPressure, PlantDischargePressure:
		return []tagUnits{{"bar_abs", 1e5, 0}, {"bar_gauge", 1e5, atm}, {"kpa_abs", 1e3, 0}, {"kpa_gauge", 1e3, atm}, {"mpa_abs", 1e6, 0}, {"mpa_gauge", 1e6, atm},
			{"psi_abs", psi, 0}, {"psi_gauge", psi, atm}, {"pa_abs", 1, 0}, {"pa_gauge", 1, atm}}, mostMaxAge
	}
	return []tagUnits{{"c", 1, 273.15}, {"k", 1, 0}, {"f", 5. / 9, 459.67 * 5 / 9}}, mostMaxAgeT
}

func (r *reader) tagUnit(s *object, t *ModbusTag, all []tagUnits) bool {
	var names []string
	for _, u := range all {
		names = append(names, u.name)
	}
	if len(all) == 1 && !s.has("unit") {
		t.Unit, t.Factor = all[0].name, all[0].factor
		return true
	}
	got, ok := s.text("unit", nil, "one of "+list(names), true)
	if !ok {
		return false
	}
	for _, u := range all {
		if u.name == got {
			t.Unit, t.Factor, t.Shift = u.name, u.factor, u.shift
			return true
		}
	}
	fix := "write one of " + list(names)
	if slices.Contains(names, got+"_abs") {
		fix = fmt.Sprintf("say whether the pressure is absolute or gauge: %s_abs or %s_gauge", got, got)
	}
	s.wrong("unit", fix, "%q is no unit of %s", clip(got), t.Value)
	return false
}

// bound is what is believed of a quantity in any case, SI.
func bound(q PlantQuantity) (lo, hi float64) {
	switch q {
	case PlantLoadStep:
		return 0, 65535
	case PlantSuctionPressure, PlantDischargePressure:
		return 100, 4e8
	}
	return 73.15, 673.15
}

func (r *reader) modbusServer(o *object, sk *Skid) {
	s := o.sub("server", false, "listen", "unit", "order", "allow", "per_address", "clients", "idle_s", "acknowledge", "cert_file", "key_file", "ca_file")
	if s == nil {
		return
	}
	v := &sk.Modbus.Server
	if at, ok := s.text("listen", nil, "host:port, e.g. 127.0.0.1:502, or none", true); ok && at != "none" {
		_, port, err := net.SplitHostPort(at)
		if n, perr := strconv.Atoi(port); err != nil || perr != nil || n < 0 || n > 65535 {
			s.wrong("listen", "write host:port (127.0.0.1:502), or none for no server", "%q is no address to listen on", clip(at))
		} else {
			v.Listen = at
		}
	}
	v.Unit = s.wholeOr("unit", 0, 255, 1)
	v.Order = s.choice("order", "abcd", "abcd", "cdab")
	for i, n := range s.list("allow", 1, 100, false, "list addresses: allow: [192.0.2.7, 198.51.100.0/24]") {
		path := fmt.Sprintf("%s.allow[%d]", s.path, i)
		w, ok := r.word(n, path, nil, "an address or a prefix: 192.0.2.7 or 198.51.100.0/24")
		if !ok {
			continue
		}
		p, err := netip.ParsePrefix(w)
		if a, aerr := netip.ParseAddr(w); aerr == nil && a.Zone() == "" {
			p, err = netip.PrefixFrom(a, a.BitLen()), nil
		}
		if err != nil {
			r.problem(place(n), path, "write an address or a prefix: 192.0.2.7 or 198.51.100.0/24", "%q is neither", clip(w))
			continue
		}
		v.Allow = append(v.Allow, p.Masked().String())
	}
	v.PerAddress = s.wholeOr("per_address", 1, 64, 4)
	v.Clients = s.wholeOr("clients", 1, 256, 32)
	v.Idle = seconds(s.numOr("idle_s", bounds{1, 3600}, 60))
	v.Acknowledge = s.choice("acknowledge", "no", "yes", "no") == "yes"
	for _, f := range []struct {
		key string
		to  *string
	}{{"cert_file", &v.CertFile}, {"key_file", &v.KeyFile}, {"ca_file", &v.CAFile}} {
		*f.to, _ = s.text(f.key, nil, "the path of a file that holds it (PEM)", false)
	}
	if (v.CertFile == "") != (v.KeyFile == "") || v.CAFile != "" && v.CertFile == "" {
		r.problem(s.at, s.path, "write cert_file and key_file, and ca_file where clients must show a certificate", "half of a TLS set-up")
	}
	if host, _, err := net.SplitHostPort(v.Listen); err == nil && v.Acknowledge && len(v.Allow) == 0 && v.CAFile == "" {
		if a, err := netip.ParseAddr(host); err != nil || !a.IsLoopback() {
			s.wrong("acknowledge", "list who may connect (allow), or ask for certificates (ca_file)", "anybody who reaches %s could acknowledge alarms", v.Listen)
		}
	}
}
