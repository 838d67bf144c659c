package measure

import (
	"lapwing/internal/crank"
	"lapwing/internal/window"
)

// Machine is what the layout of a skid's features depends on.
type Machine struct {
	Throws []Throw
}

// Throw is one throw as the measures see it.
type Throw struct {
	ID             string // t1
	Stage          int    // throws of one stage share lines; cover temperatures are compared within a stage
	Ends           [2]End
	Acoustic       bool // it has at least one accelerometer
	BlindAtSuction bool // a blind end is connected to suction; otherwise to the atmosphere
}

// End is one end of a cylinder.
type End struct {
	Works     bool // works and has a pressure channel
	Blind     bool // does no work by design
	Suction   []Valve
	Discharge []Valve
}

// Valve is one valve of a group.
type Valve struct {
	ID    string // t1.he.s1
	Cover bool   // its cover temperature is measured
}

// def defines one feature: what it is called, what people read it in, what it is.
type def struct {
	name  string
	class Class
	scale float64 // people's value = SI value · scale + shift
	shift float64
	what  string
}

const (
	one     = 1.0
	percent = 100.0
	bar     = 1e-5
	kilo    = 1e-3
	perHour = 3600.0
	mm2     = 1e6
	gee     = 1 / 9.80665
	zeroC   = -273.15
)

// Features of an end, subject t1.he or t1.ce. The order is that of endDefs.
const (
	ePs = iota
	ePd
	ePMin
	ePMax
	eRatio
	eRatioLine
	eSuctionOpens
	eSuctionCloses
	eDischargeOpens
	eDischargeCloses
	eSuctionLate
	eDischargeLate
	eSuctionLoss
	eDischargeLoss
	eWork
	ePower
	eMep
	eVeS
	eVeD
	eCapS
	eCapD
	eBalance
	eNCompEarly
	eNCompLate
	eNExpEarly
	eNExpLate
	eNCompEarlySE
	eNCompLateSE
	eNExpEarlySE
	eNExpLateSE
	eMassComp
	eMassExp
	eTAdiabatic
	eTExcess
	eLeakZero
	endCount
)

func endDefs() [endCount]def {
	return [endCount]def{
		ePs:              {"p_suction_bar_abs", Pressure, bar, 0, "suction plateau in the cylinder"},
		ePd:              {"p_discharge_bar_abs", Pressure, bar, 0, "discharge plateau in the cylinder"},
		ePMin:            {"p_min_bar_abs", Pressure, bar, 0, "lowest pressure of the turn"},
		ePMax:            {"p_max_bar_abs", Pressure, bar, 0, "highest pressure of the turn"},
		eRatio:           {"ratio_plateau", Pressure, one, 0, "pressure ratio in the cylinder"},
		eRatioLine:       {"ratio_line", Process, one, 0, "pressure ratio of the lines"},
		eSuctionOpens:    {"suction_opens_deg", Pressure, one, 0, "suction valves open"},
		eSuctionCloses:   {"suction_closes_deg", Pressure, one, 0, "suction valves close"},
		eDischargeOpens:  {"discharge_opens_deg", Pressure, one, 0, "discharge valves open"},
		eDischargeCloses: {"discharge_closes_deg", Pressure, one, 0, "discharge valves close"},
		eSuctionLate:     {"suction_opens_late_deg", Pressure, one, 0, "suction opening later than a sealed cylinder's"},
		eDischargeLate:   {"discharge_opens_late_deg", Pressure, one, 0, "discharge opening later than a sealed cylinder's"},
		eSuctionLoss:     {"suction_loss_kw", Pressure, kilo, 0, "power lost in the suction valves"},
		eDischargeLoss:   {"discharge_loss_kw", Pressure, kilo, 0, "power lost in the discharge valves"},
		eWork:            {"indicated_work_j", Pressure, one, 0, "indicated work of one turn"},
		ePower:           {"indicated_power_kw", Pressure, kilo, 0, "indicated power"},
		eMep:             {"mean_pressure_bar", Pressure, bar, 0, "mean effective pressure"},
		eVeS:             {"ve_suction_percent", Pressure, percent, 0, "volumetric efficiency by suction"},
		eVeD:             {"ve_discharge_percent", Pressure, percent, 0, "volumetric efficiency by discharge"},
		eCapS:            {"capacity_suction_kg_h", Pressure, perHour, 0, "capacity by suction"},
		eCapD:            {"capacity_discharge_kg_h", Pressure, perHour, 0, "capacity by discharge"},
		eBalance:         {"flow_balance", Pressure, one, 0, "suction flow over discharge flow"},
		eNCompEarly:      {"n_comp_early", Pressure, one, 0, "exponent of early compression"},
		eNCompLate:       {"n_comp_late", Pressure, one, 0, "exponent of late compression"},
		eNExpEarly:       {"n_exp_early", Pressure, one, 0, "exponent of early expansion"},
		eNExpLate:        {"n_exp_late", Pressure, one, 0, "exponent of late expansion"},
		eNCompEarlySE:    {"n_comp_early_se", Pressure, one, 0, "standard error of n_comp_early"},
		eNCompLateSE:     {"n_comp_late_se", Pressure, one, 0, "standard error of n_comp_late"},
		eNExpEarlySE:     {"n_exp_early_se", Pressure, one, 0, "standard error of n_exp_early"},
		eNExpLateSE:      {"n_exp_late_se", Pressure, one, 0, "standard error of n_exp_late"},
		eMassComp:        {"mass_comp_percent", Pressure, percent, 0, "apparent gain of gas while compressing"},
		eMassExp:         {"mass_exp_percent", Pressure, percent, 0, "apparent gain of gas while expanding"},
		eTAdiabatic:      {"t_adiabatic_c", Process, one, zeroC, "discharge temperature of an adiabatic compression"},
		eTExcess:         {"t_excess_k", Temperature, one, 0, "measured discharge temperature above the adiabatic one"},
		eLeakZero:        {"leak_zero_bar", Pressure, bar, 0, "pressure zero that the leak fit finds: the transducer reads this much too high"},
	}
}

// Features of a throw, subject t1.
const (
	tRodMax = iota
	tRodMin
	tGasMax
	tGasMin
	tReversal
	tReversalShare
	tPinPulls
	tPinPushes
	tPower
	tCapacity
	tLeakPhase
	tLeakRMS
	throwCount
)

func throwDefs() [throwCount]def {
	return [throwCount]def{
		tRodMax:        {"rod_load_max_kn", Pressure, kilo, 0, "largest combined rod load at the crosshead pin, compression"},
		tRodMin:        {"rod_load_min_kn", Pressure, kilo, 0, "least combined rod load at the crosshead pin, tension negative"},
		tGasMax:        {"gas_load_max_kn", Pressure, kilo, 0, "largest gas rod load, compression"},
		tGasMin:        {"gas_load_min_kn", Pressure, kilo, 0, "least gas rod load, tension negative"},
		tReversal:      {"reversal_deg", Pressure, one, 0, "longest unbroken stay of the pin load in its shorter direction"},
		tReversalShare: {"reversal_percent", Pressure, percent, 0, "peak of the pin load's lesser direction over that of the greater"},
		tPinPulls:      {"pin_pulls_deg", Pressure, one, 0, "the pin load turns from compression to tension"},
		tPinPushes:     {"pin_pushes_deg", Pressure, one, 0, "the pin load turns from tension to compression"},
		tPower:         {"power_kw", Pressure, kilo, 0, "indicated power of both ends"},
		tCapacity:      {"capacity_kg_h", Pressure, perHour, 0, "capacity by suction of both ends"},
		tLeakPhase:     {"leak_phase_deg", Pressure, one, 0, "phase shift that the leak fit finds, to be added to the angles"},
		tLeakRMS:       {"leak_residual", Pressure, one, 0, "what the leak fit leaves over, in ln p"},
	}
}

// Features of a valve event, subject t1.he.suction.opens, in throws with an accelerometer.
const (
	vPeak = iota
	vRMS
	vOnset
	vLag
	vImpact
	vCentroid
	vCrest
	vRing
	vBandLow
	vBandMid
	vBandHigh
	impactFeatures
)

// Of openings only.
const (
	vSlope = impactFeatures + iota
	vNorm
	vHits
	vHits45
	eventCount
)

func eventDefs() [eventCount]def {
	return [eventCount]def{
		vPeak:     {"peak_g", Vibration, gee, 0, "largest acceleration in the window"},
		vRMS:      {"rms_g", Vibration, gee, 0, "effective acceleration in the window"},
		vOnset:    {"onset_deg", Vibration, one, 0, "angle at which the impact begins"},
		vLag:      {"lag_ms", Vibration, 1e3, 0, "impact after the pressure's event"},
		vImpact:   {"impact_ln", Vibration, one, 0, "ln of the effective acceleration in m/s² over 3 ms from the onset, background removed"},
		vCentroid: {"centroid_deg", Vibration, one, 0, "middle of the impact's energy"},
		vCrest:    {"crest", Vibration, one, 0, "peak over effective acceleration of the impact"},
		vRing:     {"ringdown_ms", Vibration, 1e3, 0, "time constant of the impact's decay"},
		vBandLow:  {"band_low_db", Vibration, one, 0, "impact at 2 to 5 kHz, dB over 1 (m/s²)²"},
		vBandMid:  {"band_mid_db", Vibration, one, 0, "impact at 5 to 10 kHz, dB over 1 (m/s²)²"},
		vBandHigh: {"band_high_db", Vibration, one, 0, "impact at 10 to 20 kHz, dB over 1 (m/s²)²"},
		vSlope:    {"opening_slope_bar_s", Pressure, bar, 0, "slope of the cylinder pressure ahead of the opening"},
		vNorm:     {"impact_norm_ln", Vibration, one, 0, "impact_ln less what the pressure slope at opening gives it"},
		vHits:     {"extra_hits", Vibration, one, 0, "hits after the opening"},
		vHits45:   {"extra_hits_45", Vibration, one, 0, "hits after the opening in the last 45 turns that could be heard"},
	}
}

// forTheEye are the features that no baseline is learnt of.
func forTheEye(name string) bool {
	switch name {
	case "centroid_deg", "crest", "ringdown_ms", "band_low_db", "band_mid_db", "band_high_db", "opening_slope_bar_s", "extra_hits":
		return true
	}
	return false
}

// Features of a leak path, subject t1.he.suction … t1.rings.
const (
	lArea = iota
	lPercent
	lNoise
	lShape
	pathCount
)

func pathDefs() [pathCount]def {
	return [pathCount]def{
		lArea:    {"leak_area_mm2", Pressure, mm2, 0, "effective leak area by the leak fit, signed"},
		lPercent: {"leak_percent", Pressure, percent, 0, "gas through that area in a turn, per cent of the path's throughput, signed"},
		lNoise:   {"leak_noise_db", Vibration, one, 0, "leak-band level where this path would leak most, dB over 1 (m/s²)²"},
		lShape:   {"leak_shape", Vibration, one, 0, "projection of the leak-band noise on the path's own leak flow"},
	}
}

// Features of a valve with a measured cover, subject the valve's id.
const (
	cCover = iota
	cAbove
	coverCount
)

func coverDefs() [coverCount]def {
	return [coverCount]def{
		cCover: {"cover_c", Temperature, one, zeroC, "cover temperature"},
		cAbove: {"cover_above_group_k", Temperature, one, 0, "cover temperature above the middle of the other valves of its kind"},
	}
}

// EventName gives the last part of an event's subject, e.g. suction.opens.
func EventName(e window.Event) string {
	switch e {
	case window.DischargeCloses:
		return "discharge.closes"
	case window.SuctionOpens:
		return "suction.opens"
	case window.SuctionCloses:
		return "suction.closes"
	}
	return "discharge.opens"
}

// EndName gives the short name of an end: he or ce.
func EndName(end int) string {
	if end == crank.CE {
		return "ce"
	}
	return "he"
}

// index says where each group of features of a throw begins in the layout; -1 where there is none.
type index struct {
	throw  int
	end    [2]int
	event  [2][window.Events]int
	path   [5]int // in the order of the leak package: HS HD CS CD RG
	covers []cover
}

// cover is a valve whose cover temperature is measured.
type cover struct {
	id        string
	stage     int
	discharge bool
	at        int
}

// NewLayout lists the features of a machine. The order is fixed: by throw; within it the throw, head end, crank end,
// leak paths, events, covers.
func NewLayout(m Machine) Layout {
	l, _ := build(m)
	return l
}

func build(m Machine) (Layout, []index) {
	var l Layout
	var all []index
	for i, th := range m.Throws {
		add := func(subject string, end int, defs []def) int {
			at := len(l)
			for _, d := range defs {
				l = append(l, Feature{Subject: subject, Name: d.name, What: d.what, Class: d.class,
					Throw: i, End: end, Scale: d.scale, Shift: d.shift, Display: forTheEye(d.name), Flat: d.name == "impact_norm_ln" || d.name == "extra_hits_45"})
			}
			return at
		}
		none := [window.Events]int{-1, -1, -1, -1}
		ix := index{end: [2]int{-1, -1}, event: [2][window.Events]int{none, none}, path: [5]int{-1, -1, -1, -1, -1}}
		td, ed, vd, pd, cd := throwDefs(), endDefs(), eventDefs(), pathDefs(), coverDefs()
		ix.throw = add(th.ID, -1, td[:])
		for e := range th.Ends {
			if th.Ends[e].Works {
				ix.end[e] = add(th.ID+"."+EndName(e), e, ed[:])
			}
		}
		for e := range th.Ends {
			if th.Ends[e].Works {
				ix.path[2*e] = add(th.ID+"."+EndName(e)+".suction", e, pd[:])
				ix.path[2*e+1] = add(th.ID+"."+EndName(e)+".discharge", e, pd[:])
			}
		}
		if th.Ends[0].Works && th.Ends[1].Works {
			ix.path[4] = add(th.ID+".rings", -1, pd[:])
		}
		for e := range th.Ends {
			for k := range window.Event(window.Events) {
				if th.Acoustic && th.Ends[e].Works {
					defs := vd[:impactFeatures]
					if opening(k) {
						defs = vd[:]
					}
					ix.event[e][k] = add(th.ID+"."+EndName(e)+"."+EventName(k), e, defs)
				}
			}
		}
		for e := range th.Ends {
			for d, group := range [2][]Valve{th.Ends[e].Suction, th.Ends[e].Discharge} {
				for _, v := range group {
					if v.Cover {
						ix.covers = append(ix.covers, cover{v.ID, th.Stage, d == 1, add(v.ID, e, cd[:])})
					}
				}
			}
		}
		all = append(all, ix)
	}
	return l, all
}
