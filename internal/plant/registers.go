package plant

import (
	"encoding/csv"
	"fmt"
	"hash/crc32"
	"io"
	"slices"
	"strconv"
	"text/tabwriter"

	"lapwing/internal/crank"
	"lapwing/internal/skid"
)

// mapVersion rises when registers get another place or meaning; registers that were reserved may be used without.
const mapVersion = 1

// Where the parts of the map begin, and how many registers each member has. A throw more moves nothing that was there.
const (
	groupsAt, groupSize = 100, 16
	endsAt, endSize     = 1000, 40
	throwsAt, throwSize = 2000, 40
	channelsAt          = 3000
)

// Entry is one line of the register map.
type Entry struct {
	Address int // as on the wire, from 0, of input and holding registers alike
	Words   int
	Type    string // u16, u32, f32, bool
	Subject string // what it belongs to; empty: the skid
	Name    string
	Unit    string
	Meaning string
	Coil    bool
}

// Map is the register map of one skid.
type Map struct {
	Entries  []Entry
	groups   []string // subjects, in the order of their registers
	ends     []member
	throws   []member
	channels []string
	size     int // registers
	lowFirst bool
	print    uint32
}

// member is an end or throw with the names of its numbers, in the order of their registers and validity bits.
type member struct {
	subject string
	names   []named
}

// named is one number: a value of the newest turn record.
type named struct{ subject, name, unit, meaning string }

var pathNumbers = []named{
	{name: "leak_area_mm2", unit: "mm²", meaning: "effective leak area, of the newest turn; single turns scatter"},
	{name: "leak_percent", unit: "%", meaning: "gas through it, per cent of the path's throughput"},
}

// foundPrefix marks a number of a finding that stands, by the name of its amount.
const foundPrefix = "found_"

var groupNumbers = append(slices.Clone(pathNumbers),
	named{name: foundPrefix + "leak_area_mm2", unit: "mm²", meaning: "of the leak that is found, above the healthy machine's; not known while none is"},
	named{name: foundPrefix + "leak_percent", unit: "%", meaning: "likewise, per cent of the group's throughput"},
	named{name: foundPrefix + "lost_power_kw", unit: "kW", meaning: "spent on the gas that goes round"})

var endNumbers = []named{
	{name: "p_suction_bar_abs", unit: "bar", meaning: "suction plateau in the cylinder"},
	{name: "p_discharge_bar_abs", unit: "bar", meaning: "discharge plateau in the cylinder"},
	{name: "ratio_plateau", unit: "1", meaning: "discharge over suction plateau"},
	{name: "indicated_power_kw", unit: "kW", meaning: "indicated power"},
	{name: "ve_suction_percent", unit: "%", meaning: "volumetric efficiency by suction"},
	{name: "suction_opens_deg", unit: "°", meaning: "after this throw's head-end dead centre"},
	{name: "suction_closes_deg", unit: "°", meaning: "after this throw's head-end dead centre"},
	{name: "discharge_opens_deg", unit: "°", meaning: "after this throw's head-end dead centre"},
	{name: "discharge_closes_deg", unit: "°", meaning: "after this throw's head-end dead centre"},
	{name: "suction_opens_late_deg", unit: "°", meaning: "later than a sealed cylinder's"},
	{name: "discharge_opens_late_deg", unit: "°", meaning: "later than a sealed cylinder's"},
	{name: "suction_loss_kw", unit: "kW", meaning: "lost in the suction valves"},
	{name: "discharge_loss_kw", unit: "kW", meaning: "lost in the discharge valves"},
}

var throwNumbers = []named{
	{name: "rod_load_max_kn", unit: "kN", meaning: "largest combined rod load, compression"},
	{name: "rod_load_min_kn", unit: "kN", meaning: "least combined rod load, tension negative"},
	{name: "reversal_deg", unit: "°", meaning: "shorter stay of the pin load in one direction"},
	{name: "reversal_percent", unit: "%", meaning: "lesser over greater peak of the pin load"},
	{name: "power_kw", unit: "kW", meaning: "indicated power of both ends"},
	{name: "capacity_kg_h", unit: "kg/h", meaning: "capacity by suction"},
	{name: "delivered_nm3_h", unit: "Nm³/h", meaning: "gas delivered, 0 °C and 101.325 kPa"},
	{name: "valve_loss_kw", unit: "kW", meaning: "lost in all valves of the throw"},
	{name: "isentropic_efficiency_percent", unit: "%", meaning: "from line to line"},
	{name: "specific_energy_kwh_1000nm3", unit: "kWh/1000 Nm³", meaning: "indicated energy for gas delivered"},
}

const (
	stateMeaning    = "0 not known, 1 normal, 2 unacknowledged, 3 acknowledged, 4 returned unacknowledged, 5 shelved, 6 suppressed by design, 7 latched unacknowledged, 8 latched acknowledged, 9 out of service; of the worst point"
	severityMeaning = "0 none, 1 advisory, 2 alert, 3 danger"
	kindMeaning     = "0 none, 1 leaking, 2 impacting hard, 3 opening late, 4 fluttering, 5 dead centre, 6 pressure zero, 7 clearance, 8 gas, 9 accelerometer gain, 10 sensor, 11 limit, 99 other; of the worst point"
	validMeaning    = "bit 0 (the lowest) for the first number below, bit 1 for the second …: 1 known; 0 not known, the number is then a quiet NaN"
	dutyMeaning     = "0 unknown, 1 stopped, 2 starting, 3 changing, 4 steady, 5 unloaded, 6 out of range"
	endMeaning      = "0 lost, 1 following, 2 holding, 3 idle, 4 not delivering; 65535 not known"
	channelMeaning  = "NAMUR NE 107: 0 function check, 1 good, 2 maintenance required, 3 out of specification, 4 failure; 65535 not known"
)

// The registers of the head, by address.
const (
	rHeartbeat    = 0
	rVersion      = 1
	rPrint        = 2
	rHealth       = 4
	rShaft        = 5
	rMode         = 6
	rWorst        = 7
	rUnacked      = 8
	rStanding     = 9
	rAdvisory     = 10
	rAlert        = 11
	rDanger       = 12
	rFlood        = 13
	rBadChannels  = 14
	rTroubles     = 15
	rTurns        = 16
	rBadTurns     = 18
	rRPM          = 20
	rRPMValid     = 22
	rLearnLeft    = 24
	rTime         = 26
	rAcknowledges = 28
)

var head = []Entry{
	{Address: rHeartbeat, Words: 1, Type: "u16", Name: "heartbeat", Meaning: "rises with every turn and at least once a second of samples, and begins again after 65535; stands still when the monitor does not compute"},
	{Address: rVersion, Words: 1, Type: "u16", Name: "map_version", Meaning: "of the meaning of these registers"},
	{Address: rPrint, Words: 2, Type: "u32", Name: "map_fingerprint", Meaning: "CRC-32 of this table: changes when the skid file gives other registers"},
	{Address: rHealth, Words: 1, Type: "u16", Name: "health", Meaning: "0 not known, 1 good, 2 somebody should look (page and MQTT say at what), 3 valves are not being watched"},
	{Address: rShaft, Words: 1, Type: "u16", Name: "shaft", Meaning: "0 unknown, 1 standstill, 2 starting, 3 running, 4 marks lost, 5 coasting"},
	{Address: rMode, Words: 1, Type: "u16", Name: "mode", Meaning: "0 measuring only, 1 learning, 2 judging"},
	{Address: rWorst, Words: 1, Type: "u16", Name: "worst_severity", Meaning: severityMeaning + "; of what stands"},
	{Address: rUnacked, Words: 1, Type: "u16", Name: "unacknowledged", Meaning: "alarm points that wait for an acknowledgement"},
	{Address: rStanding, Words: 1, Type: "u16", Name: "standing", Meaning: "alarm points that ask something of a person"},
	{Address: rAdvisory, Words: 1, Type: "u16", Name: "standing_advisory"},
	{Address: rAlert, Words: 1, Type: "u16", Name: "standing_alert"},
	{Address: rDanger, Words: 1, Type: "u16", Name: "standing_danger"},
	{Address: rFlood, Words: 1, Type: "u16", Name: "alarm_flood", Meaning: "1: more alarms come in than a person can follow"},
	{Address: rBadChannels, Words: 1, Type: "u16", Name: "channels_not_good"},
	{Address: rTroubles, Words: 1, Type: "u16", Name: "troubles", Meaning: "sentences under trouble in the health message, process values that are not used among them"},
	{Address: rTurns, Words: 2, Type: "u32", Name: "turns", Meaning: "since the start of the monitor"},
	{Address: rBadTurns, Words: 2, Type: "u32", Name: "turns_not_valid"},
	{Address: rRPM, Words: 2, Type: "f32", Name: "speed_rpm", Unit: "rpm"},
	{Address: rRPMValid, Words: 1, Type: "u16", Name: "speed_known", Meaning: "1 known; 0 not known, speed_rpm is then a quiet NaN"},
	{Address: rLearnLeft, Words: 2, Type: "u32", Name: "learning_turns_left"},
	{Address: rTime, Words: 2, Type: "u32", Name: "time_s", Unit: "s", Meaning: "seconds since 1970-01-01 UTC of what is shown, by the sample clock; 0 not known"},
	{Address: rAcknowledges, Words: 1, Type: "u16", Name: "acknowledge_possible", Meaning: "1: the acknowledge coils may be written"},
}

// NewMap makes the register map of a skid. The same file gives the same map.
func NewMap(sk *skid.Skid) *Map {
	m := &Map{lowFirst: sk.Modbus.Server.Order == "cdab"}
	m.Entries = append(m.Entries, head...)
	for t := range sk.Throws {
		for _, e := range [2]int{crank.HE, crank.CE} {
			if !sk.Throws[t].Ends[e].Works {
				continue
			}
			for _, g := range [2]string{".suction", ".discharge"} {
				m.group(sk.EndName(t, e) + g)
			}
		}
	}
	for t := range sk.Throws {
		for _, e := range [2]int{crank.HE, crank.CE} {
			if sk.Throws[t].Ends[e].Works {
				at := endsAt + endSize*len(m.ends)
				subject := sk.EndName(t, e)
				m.add(at, 1, "u16", subject, "state", "", endMeaning)
				m.add(at+1, 1, "u16", subject, "alarm_state", "", stateMeaning+" of the end itself")
				m.add(at+2, 1, "u16", subject, "alarm_severity", "", severityMeaning)
				m.ends = append(m.ends, m.numbers(at+3, subject, endNumbers))
			}
		}
	}
	for t := range sk.Throws {
		th := &sk.Throws[t]
		at := throwsAt + throwSize*len(m.throws)
		m.add(at, 1, "u16", th.ID, "duty", "", dutyMeaning)
		m.add(at+1, 1, "u16", th.ID, "load_step", "", "code told by the control system, or read off the traces; 65535 not known")
		m.add(at+2, 1, "u16", th.ID, "alarm_state", "", stateMeaning+" of the throw itself and its rings")
		m.add(at+3, 1, "u16", th.ID, "alarm_severity", "", severityMeaning)
		numbers := slices.Clone(throwNumbers)
		if th.Ends[crank.HE].Works && th.Ends[crank.CE].Works {
			for _, n := range pathNumbers {
				numbers = append(numbers, named{th.ID + ".rings", n.name, n.unit, n.meaning})
			}
		}
		m.throws = append(m.throws, m.numbers(at+4, th.ID, numbers))
	}
	for i := range sk.Channels {
		m.add(channelsAt+i, 1, "u16", sk.Channels[i].ID, "state", "", channelMeaning)
		m.channels = append(m.channels, sk.Channels[i].ID)
	}
	m.size = channelsAt + len(m.channels)
	if sk.Modbus.Server.Acknowledge {
		m.Entries = append(m.Entries, Entry{Address: 0, Words: 1, Type: "bool", Name: "acknowledge", Coil: true, Meaning: "reads 1 while anything is unacknowledged; write 1 to acknowledge all of it"})
		for i, g := range m.groups {
			m.Entries = append(m.Entries, Entry{Address: groupsAt + groupSize*i, Words: 1, Type: "bool", Subject: g, Name: "acknowledge", Coil: true, Meaning: "the same for this group"})
		}
	}
	sum := crc32.NewIEEE()
	_ = m.CSV(sum) // a hash takes everything
	m.print = sum.Sum32()
	return m
}

func (m *Map) add(at, words int, kind, subject, name, unit, meaning string) {
	m.Entries = append(m.Entries, Entry{Address: at, Words: words, Type: kind, Subject: subject, Name: name, Unit: unit, Meaning: meaning})
}

// The registers of a group, after its first.
const (
	gState, gSeverity, gKind, gOpen, gValve, gValid, gNumbers = 0, 1, 2, 3, 4, 5, 6
)

func (m *Map) group(subject string) {
	at := groupsAt + groupSize*len(m.groups)
	m.groups = append(m.groups, subject)
	m.add(at+gState, 1, "u16", subject, "state", "", stateMeaning)
	m.add(at+gSeverity, 1, "u16", subject, "severity", "", severityMeaning)
	m.add(at+gKind, 1, "u16", subject, "kind", "", kindMeaning)
	m.add(at+gOpen, 1, "u16", subject, "open_points", "", "alarm points of this group that ask something of a person")
	m.add(at+gValve, 1, "u16", subject, "valve", "", "number of the valve within the group, where the evidence names one; 0 none")
	m.numbers(at+gValid, subject, groupNumbers)
}

// numbers lays out a validity register and a float pair for each number.
func (m *Map) numbers(at int, subject string, names []named) member {
	m.add(at, 1, "u16", subject, "known", "", validMeaning)
	out := member{subject: subject}
	for i, n := range names {
		if n.subject == "" {
			n.subject = subject
		}
		m.add(at+1+2*i, 2, "f32", n.subject, n.name, n.unit, n.meaning)
		out.names = append(out.names, n)
	}
	return out
}

func (e *Entry) row() []string {
	ref := []string{strconv.Itoa(30001 + e.Address), strconv.Itoa(40001 + e.Address)}
	if e.Coil {
		ref = []string{"", fmt.Sprintf("%05d", 1+e.Address)}
	}
	return []string{strconv.Itoa(e.Address), ref[0], ref[1], strconv.Itoa(e.Words), e.Type, e.Subject, e.Name, e.Unit, e.Meaning}
}

var heading = []string{"address", "input", "holding_or_coil", "words", "type", "subject", "name", "unit", "meaning"}

// CSV writes the map as a table for other programs.
func (m *Map) CSV(w io.Writer) error {
	c := csv.NewWriter(w)
	_ = c.Write(heading)
	for i := range m.Entries {
		_ = c.Write(m.Entries[i].row())
	}
	c.Flush()
	if err := c.Error(); err != nil {
		return fmt.Errorf("plant: register map: %w", err)
	}
	return nil
}

// Table writes the map for people. A meaning that many registers share is written once.
func (m *Map) Table(w io.Writer) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "address\tinput\tholding\twords\ttype\tname\tunit\tmeaning")
	seen := map[string]string{}
	for i := range m.Entries {
		e := &m.Entries[i]
		r := e.row()
		name, meaning := e.Name, e.Meaning
		if e.Subject != "" {
			name = e.Subject + " " + name
		}
		if first, told := seen[meaning]; told && meaning != "" && len(meaning) > 60 {
			meaning = "as " + first
		} else {
			seen[meaning] = name
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\n", r[0], r[1], r[2], r[3], r[4], name, e.Unit, meaning)
	}
	if err := t.Flush(); err != nil {
		return fmt.Errorf("plant: register map: %w", err)
	}
	return nil
}
