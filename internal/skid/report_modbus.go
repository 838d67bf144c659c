package skid

import (
	"net"
	"strings"
)

// modbus says what is read over Modbus and who may read here; nothing where the file has no such section.
func (p *page) modbus(sk *Skid) {
	m := &sk.Modbus
	if len(m.Devices) == 0 && m.Server.Listen == "" {
		return
	}
	p.title("Modbus")
	var rows []string
	for i := range m.Devices {
		d := &m.Devices[i]
		line := f("%s, unit %d, every %s, an answer within %s", d.URL, d.Unit, d.Every, d.Timeout)
		if d.Baud > 0 {
			line += f("; %d baud, %d data bits, parity %s, %d stop bits", d.Baud, d.DataBits, d.Parity, d.StopBits)
		}
		if d.WorstAnswer > 0 {
			line += f("; rests %s after an error", d.WorstAnswer)
		}
		rows = append(rows, row(d.Name, line))
		if c := d.Canary; c != nil {
			rows = append(rows, row("", f("canary: %s is %s, or nothing is believed", whereabouts(c.Register), short(c.Is))))
		}
		if h := d.Heartbeat; h != nil {
			rows = append(rows, row("", f("heartbeat: %s moves within %s, or nothing is believed", whereabouts(h.Register), h.Within)))
		}
		for k := range d.Tags {
			t := &d.Tags[k]
			people := func(si float64) string { return f("%.4g", (si-t.Shift)/t.Factor) }
			line := f("%s: %s", t.Value, whereabouts(t.Register))
			if t.Scale != 1 || t.Offset != 0 {
				line += f(" times %s plus %s", short(t.Scale), short(t.Offset))
			}
			if t.What != PlantLoadStep {
				line += f(" in %s, believed from %s to %s", t.Unit, people(t.Min), people(t.Max))
			}
			rows = append(rows, row("", line+f(", for %s", t.MaxAge)))
		}
	}
	if s := &m.Server; s.Listen != "" {
		who := "anybody who reaches it"
		if len(s.Allow) > 0 {
			who = list(s.Allow)
		}
		switch {
		case s.CAFile != "":
			who += " with a certificate"
		case s.CertFile != "":
			who += ", over TLS"
		}
		rows = append(rows, row("server", f("%s, unit %d, for %s; at most %d connections, %d from one address", s.Listen, s.Unit, who, s.Clients, s.PerAddress)))
		may := "read only"
		if s.Acknowledge {
			may = "read only but for the acknowledge coils"
		}
		rows = append(rows, row("", may+"; lapwing registers prints the map"))
	}
	p.table(rows)
}

// whereabouts is where a value stands in a device.
func whereabouts(r Register) string {
	kind := [...]string{"", "coil", "discrete input", "holding register", "input register"}[r.Function]
	if r.Function <= 2 {
		return f("%s %d", kind, r.Address)
	}
	order := ""
	if r.Order != "abcd" {
		order = " " + r.Order
	}
	return f("%s %d, %s%s", kind, r.Address, r.Type, order)
}

func (d *doubter) modbus() {
	m := &d.sk.Modbus
	gives := map[PlantQuantity]string{}
	for i := range m.Devices {
		for k := range m.Devices[i].Tags {
			gives[m.Devices[i].Tags[k].What] = f("modbus.devices[%d].tags[%d]", i, k)
		}
	}
	pressure := gives[PlantSuctionPressure] + gives[PlantDischargePressure]
	if gives[PlantLoadStep] == "" && pressure != "" && len(d.sk.Steps) > 1 {
		d.add("modbus.devices", "Pockets and unloaders change what is normal, and the line is then told the file's fixed step for ever. Ask which register the control system has the load step in.",
			"pressures are read and the load step is not, though the machine has %d", len(d.sk.Steps))
	}
	if (gives[PlantSuctionPressure] == "") != (gives[PlantDischargePressure] == "") {
		d.add("modbus.devices", "The other line stays at the file's fixed value, so the ratio is wrong as soon as the load moves. Compare with the instrument list.", "one of the line pressures is read and the other is not")
	}
	s := &m.Server
	host, _, err := net.SplitHostPort(s.Listen)
	if err != nil || len(s.Allow) > 0 || s.CAFile != "" || host == "localhost" {
		return
	}
	if ip := net.ParseIP(strings.Trim(host, "[]")); ip == nil || !ip.IsLoopback() {
		d.add("modbus.server.listen", "Modbus has no password: everybody on that network reads the registers. List the control system's addresses under allow, or ask for certificates with ca_file.",
			"the Modbus server listens on %s for anybody", s.Listen)
	}
}
