package skid

import "time"

// Modbus is the traffic with control systems over Modbus: what is read from them, and what they may read here.
type Modbus struct {
	Devices []ModbusDevice
	Server  ModbusServer
}

// ModbusDevice is one unit that process values are read from. Devices of one URL share a connection or serial bus.
type ModbusDevice struct {
	Name                      string
	URL                       string // tcp://host:port, tcp+tls://host:port, rtuovertcp://host:port or rtu:///dev/…
	Unit                      int
	Baud, DataBits, StopBits  int    // serial lines; 0: the usual ones
	Parity                    string // none, even, odd
	Timeout                   time.Duration
	Every                     time.Duration // from one reading to the next
	WorstAnswer               time.Duration // how late an answer can still come in: so long a serial line rests after an error
	CAFile, CertFile, KeyFile string        // tcp+tls only
	Canary                    *ModbusCanary // nil: none
	Heartbeat                 *ModbusBeat   // nil: none
	Tags                      []ModbusTag
}

// ModbusCanary is a register whose content never changes: when it reads otherwise, nothing read beside it is believed.
type ModbusCanary struct {
	Register
	Is float64
}

// ModbusBeat is a register that moves while what stands behind the device is alive: a gateway goes on answering with the
// last values of a controller that has stopped. When it stands still for longer, nothing from the device is believed.
type ModbusBeat struct {
	Register
	Within time.Duration
}

// Register is a value's place in a device and its form there.
type Register struct {
	Function int    // 1 coils, 2 discrete inputs, 3 holding registers, 4 input registers
	Address  int    // as on the wire, from 0
	Type     string // bool, u16, i16, u32, i32, u64, f32, f64
	Order    string // of the bytes: abcd (highest first), cdab, badc, dcba
}

// Words is how many registers (of functions 1 and 2: bits) the value fills.
func (r Register) Words() int {
	switch r.Type {
	case "u32", "i32", "f32":
		return 2
	case "u64", "f64":
		return 4
	}
	return 1
}

// PlantQuantity says which process value a tag gives.
type PlantQuantity int

// The process values.
const (
	PlantLoadStep PlantQuantity = iota
	PlantSuctionPressure
	PlantDischargePressure
	PlantSuctionTemperature
	PlantDischargeTemperature
	PlantCover
)

// ModbusTag is one process value in a device: in SI units it is (number·Scale + Offset)·Factor + Shift.
type ModbusTag struct {
	Register
	Value         string // its name: stage1.p_suction, load_step, t1.he.s1.cover
	What          PlantQuantity
	Stage         int    // index into Process.Stages
	Valve         string // of a cover
	Scale, Offset float64
	Unit          string
	Factor, Shift float64
	Min, Max      float64 // SI, outside is not believed
	MaxAge        time.Duration
}

// ModbusServer is the register map that others read. Listen empty: none.
type ModbusServer struct {
	Listen                    string
	Unit                      int
	Order                     string   // of floats and 32-bit numbers: abcd, or cdab for the low word first
	Allow                     []string // address prefixes of those who may connect; none: anybody who can reach it
	PerAddress, Clients       int      // connections from one address, and in all
	Idle                      time.Duration
	Acknowledge               bool // the acknowledge coils may be written
	CertFile, KeyFile, CAFile string
}
