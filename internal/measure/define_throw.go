package measure

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
	// For the eye.
	tPistonMax
	tPistonMin
	tRatedComp
	tRatedTens
	tLoss
	tLossShare
	tDelivered
	tDeliveredNorm
	tEfficiency
	tSpecific
	tReversalU
	throwCount
)

func throwDefs() [throwCount]def {
	const (
		both   = "both ends' pressures, or one blind by design"
		loadU  = "gain of the transmitters, masses; turn 0.1 to 0.2 %"
		turnsU = "U; turn 0.01 to 0.05°; 3° where the load stays near zero for long, see reversal_u_deg"
		sumU   = "as those of the ends"
	)
	return [throwCount]def{
		tRodMax: {name: "rod_load_max_kn", unit: "kN", class: Pressure, scale: kilo, what: "largest combined rod load at the crosshead pin, compression",
			how: "gas load less inertia of piston, rod and crosshead, at the instantaneous speed", source: srcAPI, valid: both, unc: loadU},
		tRodMin: {name: "rod_load_min_kn", unit: "kN", class: Pressure, scale: kilo, what: "least combined rod load at the crosshead pin, tension negative",
			how: "likewise", source: srcAPI, valid: both, unc: loadU},
		tGasMax: {name: "gas_load_max_kn", unit: "kN", class: Pressure, scale: kilo, what: "largest gas rod load, compression",
			how: "p_HE A_HE − p_CE A_CE − p_atm (A_HE − A_CE)", source: srcAPI, valid: both, unc: "gain of the transmitters"},
		tGasMin: {name: "gas_load_min_kn", unit: "kN", class: Pressure, scale: kilo, what: "least gas rod load, tension negative",
			how: "likewise", source: srcAPI, valid: both, unc: "gain of the transmitters"},
		tReversal: {name: "reversal_deg", unit: "°", class: Pressure, scale: one, what: "longest unbroken stay of the pin load in its shorter direction",
			how: "at least 15° are asked for", source: srcAPI, valid: both, unc: "reversal_u_deg; turn 0.01 to 0.05°"},
		tReversalShare: {name: "reversal_percent", unit: "%", class: Pressure, scale: percent, what: "peak of the pin load's lesser direction over that of the greater",
			how: "at least 3 % are asked for", source: srcAPI, valid: both, unc: loadU},
		tPinPulls: {name: "pin_pulls_deg", unit: "°", class: Pressure, scale: one, what: "the pin load turns from compression to tension",
			source: "vibration.md 2", valid: "once a turn", unc: turnsU},
		tPinPushes: {name: "pin_pushes_deg", unit: "°", class: Pressure, scale: one, what: "the pin load turns from tension to compression",
			source: "vibration.md 2", valid: "once a turn", unc: turnsU},
		tPower: {name: "power_kw", unit: "kW", class: Pressure, scale: kilo, what: "indicated power of both ends",
			how: "idle ends with what they take", source: srcMethods, valid: "every working end known", unc: sumU},
		tCapacity: {name: "capacity_kg_h", unit: "kg/h", class: Pressure, scale: perHour, what: "capacity by suction of both ends",
			how: "an idle end counts nothing", source: srcMethods, valid: "every working end known", unc: sumU},
		tLeakPhase: {name: "leak_phase_deg", unit: "°", class: Pressure, scale: one, what: "phase shift that the leak fit finds, to be added to the angles",
			source: srcLeaks, valid: "leak fit", unc: "turn 0.03 to 0.1°"},
		tLeakRMS: {name: "leak_residual", unit: "1", class: Pressure, scale: one, what: "what the leak fit leaves over, in ln p",
			source: srcLeaks, valid: "leak fit", unc: "–"},

		tPistonMax: {name: "piston_rod_max_kn", unit: "kN", class: Pressure, scale: kilo, what: "largest load in the piston rod at the crosshead, compression",
			how: "gas load less inertia of piston and rod", source: srcAPI, valid: both, unc: loadU, eye: true},
		tPistonMin: {name: "piston_rod_min_kn", unit: "kN", class: Pressure, scale: kilo, what: "least load in the piston rod at the crosshead, tension negative",
			how: "likewise", source: srcAPI, valid: both, unc: loadU, eye: true},
		tRatedComp: {name: "rod_load_compression_rated_percent", unit: "%", class: Pressure, scale: percent, what: "rod_load_max_kn as share of the rated load",
			how: "0 where the pin is never pushed", source: "skid file, rod_load_compression_kn", valid: "rated load given", unc: loadU, eye: true},
		tRatedTens: {name: "rod_load_tension_rated_percent", unit: "%", class: Pressure, scale: percent, what: "rod_load_min_kn as share of the rated load",
			how: "0 where the pin is never pulled", source: "skid file, rod_load_tension_kn", valid: "rated load given", unc: loadU, eye: true},
		tLoss: {name: "valve_loss_kw", unit: "kW", class: Pressure, scale: kilo, what: "power lost in all valves of the throw",
			source: srcBrun, valid: "every delivering end known", unc: sumU, eye: true},
		tLossShare: {name: "valve_loss_percent", unit: "%", class: Pressure, scale: percent, what: "valves' share of power_kw",
			source: srcBrun, valid: "every delivering end known", unc: sumU, eye: true},
		tDelivered: {name: "delivered_kg_h", unit: "kg/h", class: Pressure, scale: perHour, what: "gas delivered by both ends, heat and leaks taken off",
			how: "an idle end counts nothing", source: "mass balance of the ends", valid: "every delivering end known", unc: sumU, eye: true},
		tDeliveredNorm: {name: "delivered_nm3_h", unit: "Nm³/h", class: Pressure, scale: perHour, what: "gas delivered by both ends as normal volume",
			how: "0 °C, 101.325 kPa (DIN 1343), real gas", source: "DIN 1343, from memory", valid: "every delivering end known", unc: sumU, eye: true},
		tEfficiency: {name: "isentropic_efficiency_percent", unit: "%", class: Pressure, scale: percent, what: "isentropic efficiency of the throw from line to line",
			how: "as of an end; idle ends' power counts", source: srcBrun + " p. 209", valid: "every delivering end and the lines known", unc: sumU, eye: true},
		tSpecific: {name: "specific_energy_kwh_1000nm3", unit: "kWh/1000 Nm³", class: Pressure, scale: 1 / 3600.0, what: "indicated energy for gas delivered",
			how: "power_kw over delivered_nm3_h", source: "trade usage", valid: "every delivering end known", unc: sumU, eye: true},
		tReversalU: {name: "reversal_u_deg", unit: "°", class: Pressure, scale: one, what: "what transmitters and the angle scale leave open in reversal_deg",
			how: "95 %: reversal taken anew with zeros off by 0.3 % of suction pressure, gains by 0.2 %, the angle by half of U, each in turn to either side; root of the sum of squares, twice", source: "first order, jumps in it", valid: both, unc: "–", eye: true},
	}
}
