package measure

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
	// For the eye.
	eTDischarge
	eSuctionExpected
	eDischargeExpected
	eUndershoot
	eOvershoot
	ePulseS
	ePulseD
	eRise
	eFall
	eStraightComp
	eStraightExp
	eClearance
	eLossShareS
	eLossShareD
	eNormS
	eNormD
	eDelivered
	eDeliveredNorm
	eEfficiency
	eSpecific
	ePowerU
	eVeSU
	eVeDU
	eDeliveredU
	endCount
)

func endDefs() [endCount]def {
	const (
		delivers  = "end delivers"
		gasAndT   = "gas and suction temperature known"
		plateauU  = "transmitter (zero and gain); turn 0.02 to 0.05 %"
		openU     = "U; turn 0.1 to 0.3° suction, 0.06 to 0.2° discharge; against the truth see Windows, measured"
		closeU    = "suction ill-conditioned at full load (3 to 9°), discharge 1 to 2°"
		lateU     = "turn 0.01 to 0.02°, block under load swings 0.05 to 0.09°; a zero error moves it"
		exponentU = "turn 0.0004 to 0.003; dead centre 0.023 (compression) and 0.017 (expansion) a degree, clearance 0.016 and 0.051 a point (worked/ex4, ex5)"
		flowU     = "ve and pressure; charge heating and the leaks of a healthy machine make it read 0.5 to 3 % high, with hydrogen and slowly up to 14 %"
		losses    = "the line's pressure against the transmitter's zero: 0.3 % of the pressure is up to 10 % of the loss; turn 0.02 to 0.12 % of indicated power"
	)
	return [endCount]def{
		ePs: {name: "p_suction_bar_abs", unit: "bar", class: Pressure, scale: bar, what: "suction plateau in the cylinder",
			how: "median 26 to 3° before the outer dead centre", source: "windows.md 3", valid: "also on an idle end", unc: plateauU},
		ePd: {name: "p_discharge_bar_abs", unit: "bar", class: Pressure, scale: bar, what: "discharge plateau in the cylinder",
			how: "median 20 to 3° before the inner dead centre", source: "windows.md 3", valid: delivers, unc: plateauU},
		ePMin: {name: "p_min_bar_abs", unit: "bar", class: Pressure, scale: bar, what: "lowest pressure of the turn", how: "over 0…360°",
			source: srcOwn, valid: "always", unc: "transmitter; noise of one point"},
		ePMax: {name: "p_max_bar_abs", unit: "bar", class: Pressure, scale: bar, what: "highest pressure of the turn", how: "over 0…360°",
			source: srcOwn, valid: "always", unc: "transmitter; noise of one point"},
		eRatio: {name: "ratio_plateau", unit: "1", class: Pressure, scale: one, what: "pressure ratio in the cylinder",
			how: "discharge over suction plateau", source: srcMethods, valid: delivers, unc: "zero error at suction, as a share"},
		eRatioLine: {name: "ratio_line", unit: "1", class: Process, scale: one, what: "pressure ratio of the lines",
			source: srcMethods, valid: "line pressures known", unc: "line transmitters; up to 1 s late"},
		eSuctionOpens: {name: "suction_opens_deg", unit: "°", class: Pressure, scale: one, what: "suction valves open",
			how: "lasting departure from the closed line", source: "windows.md 2", valid: "found on this turn", unc: openU},
		eSuctionCloses: {name: "suction_closes_deg", unit: "°", class: Pressure, scale: one, what: "suction valves close",
			how: "walked back along the closed line", source: "windows.md 2", valid: "found on this turn", unc: closeU},
		eDischargeOpens: {name: "discharge_opens_deg", unit: "°", class: Pressure, scale: one, what: "discharge valves open",
			how: "lasting departure from the closed line", source: "windows.md 2", valid: "found on this turn", unc: openU},
		eDischargeCloses: {name: "discharge_closes_deg", unit: "°", class: Pressure, scale: one, what: "discharge valves close",
			how: "walked back along the closed line", source: "windows.md 2", valid: "found on this turn", unc: closeU},
		eSuctionLate: {name: "suction_opens_late_deg", unit: "°", class: Pressure, scale: one, what: "suction opening later than a sealed cylinder's",
			how: "closed line ∩ plateau, minus that of V_close (p_close/p_open)^(1/KV)", source: "windows.md 2, 3", valid: "following", unc: lateU},
		eDischargeLate: {name: "discharge_opens_late_deg", unit: "°", class: Pressure, scale: one, what: "discharge opening later than a sealed cylinder's",
			how: "as suction_opens_late_deg", source: "windows.md 2, 3", valid: "following", unc: lateU},
		eSuctionLoss: {name: "suction_loss_kw", unit: "kW", class: Pressure, scale: kilo, what: "power lost in the suction valves",
			how:    "∫(p_line − p)dV from the opening to the dead centre and on to a late closing, times turns a second; the plateau where no line is known",
			source: srcBrun, valid: "opening found", unc: losses},
		eDischargeLoss: {name: "discharge_loss_kw", unit: "kW", class: Pressure, scale: kilo, what: "power lost in the discharge valves",
			how: "∫(p − p_line)(−dV), likewise", source: srcBrun, valid: "opening found", unc: losses},
		eWork: {name: "indicated_work_j", unit: "J", class: Pressure, scale: one, what: "indicated work of one turn",
			how: "−∮p dV over 0…360°, trapezoids; positive for work done on the gas", source: srcMethods, valid: "always", unc: "as indicated_power_kw"},
		ePower: {name: "indicated_power_kw", unit: "kW", class: Pressure, scale: kilo, what: "indicated power",
			how: "work times turns a second", source: srcMethods, valid: "always", unc: "power_u_percent for the angle, the transmitter's gain one to one; the rest 0.02 %"},
		eMep: {name: "mean_pressure_bar", unit: "bar", class: Pressure, scale: bar, what: "mean effective pressure",
			how: "work over swept volume", source: "worked/ex2", valid: "always", unc: "as indicated_power_kw"},
		eVeS: {name: "ve_suction_percent", unit: "%", class: Pressure, scale: percent, what: "volumetric efficiency by suction",
			how:    "(V_trapped − V_opens)/V_swept; V_trapped where the compression line meets the suction plateau: it holds for early, full and late closing",
			source: srcMethods, valid: "suction opening and compression line found", unc: "ve_suction_u_percent for the angle; turn 0.01 to 0.06 points"},
		eVeD: {name: "ve_discharge_percent", unit: "%", class: Pressure, scale: percent, what: "volumetric efficiency by discharge",
			how: "(V_opens − V_clearance)/V_swept", source: srcMethods, valid: "discharge opening found", unc: "ve_discharge_u_percent for the angle; clearance does not enter"},
		eCapS: {name: "capacity_suction_kg_h", unit: "kg/h", class: Pressure, scale: perHour, what: "capacity by suction",
			how: "VE_s V_swept p_s/(Zs R Ts) n; suction plateau, line temperature", source: srcMethods, valid: gasAndT, unc: flowU},
		eCapD: {name: "capacity_discharge_kg_h", unit: "kg/h", class: Pressure, scale: perHour, what: "capacity by discharge",
			how: "VE_d V_swept p_d/(Zd R Td) n; measured Td, adiabatic where none is known", source: srcMethods, valid: "gas and a temperature known", unc: flowU},
		eBalance: {name: "flow_balance", unit: "1", class: Pressure, scale: one, what: "suction flow over discharge flow",
			how: "always with the adiabatic Td: a thermometer lags by minutes", source: srcMethods, valid: gasAndT, unc: "healthy 0.988 to 0.997 on the model; drifts with temperature, 0.013 a block"},
		eNCompEarly: {name: "n_comp_early", unit: "1", class: Pressure, scale: one, what: "exponent of early compression",
			how: "−d ln p/d ln V by least squares, from 8 % of ln(pd/ps) to the middle", source: srcMethods, valid: "6 points", unc: exponentU},
		eNCompLate: {name: "n_comp_late", unit: "1", class: Pressure, scale: one, what: "exponent of late compression",
			how: "from the middle to 92 %", source: srcMethods, valid: "6 points", unc: exponentU},
		eNExpEarly: {name: "n_exp_early", unit: "1", class: Pressure, scale: one, what: "exponent of early expansion",
			how: "from 92 % down to the middle: high pressure comes first", source: srcMethods, valid: "6 points", unc: exponentU},
		eNExpLate: {name: "n_exp_late", unit: "1", class: Pressure, scale: one, what: "exponent of late expansion",
			how: "from the middle down to 8 %", source: srcMethods, valid: "6 points", unc: exponentU},
		eNCompEarlySE: {name: "n_comp_early_se", unit: "1", class: Pressure, scale: one, what: "standard error of n_comp_early",
			how: "for independent residuals", source: "least squares", valid: "6 points", unc: "bend and pulsation are in it: turns scatter by half of it"},
		eNCompLateSE: {name: "n_comp_late_se", unit: "1", class: Pressure, scale: one, what: "standard error of n_comp_late",
			how: "likewise", source: "least squares", valid: "6 points", unc: "likewise"},
		eNExpEarlySE: {name: "n_exp_early_se", unit: "1", class: Pressure, scale: one, what: "standard error of n_exp_early",
			how: "likewise", source: "least squares", valid: "6 points", unc: "likewise"},
		eNExpLateSE: {name: "n_exp_late_se", unit: "1", class: Pressure, scale: one, what: "standard error of n_exp_late",
			how: "likewise", source: "least squares", valid: "6 points", unc: "likewise"},
		eMassComp: {name: "mass_comp_percent", unit: "%", class: Pressure, scale: percent, what: "apparent gain of gas while compressing",
			how: "Δm/m = Δ(ln p + KV ln V)/KV, first to last tenth of the stroke", source: srcLeaks, valid: "12 points, KV known", unc: "wall heat and a wrong clearance read as gas; turn 0.01 to 0.03, block under load swings 0.05"},
		eMassExp: {name: "mass_exp_percent", unit: "%", class: Pressure, scale: percent, what: "apparent gain of gas while expanding",
			how: "over the expansion", source: srcLeaks, valid: "12 points, KV known", unc: "likewise"},
		eTAdiabatic: {name: "t_adiabatic_c", unit: "°C", class: Process, scale: one, shift: zeroC, what: "discharge temperature of an adiabatic compression",
			how: "Ts (pd/ps)^((KT−1)/KT) over the plateaus", source: srcBloch + " A-1", valid: gasAndT, unc: "suction thermometer; 0.8 K a per cent of ratio"},
		eTExcess: {name: "t_excess_k", unit: "K", class: Temperature, scale: one, what: "measured discharge temperature above the adiabatic one",
			source: srcMethods, valid: "discharge temperature known", unc: "thermometers; lags a change of load by minutes"},
		eLeakZero: {name: "leak_zero_bar", unit: "bar", class: Pressure, scale: bar, what: "pressure zero that the leak fit finds: the transducer reads this much too high",
			source: srcLeaks, valid: "leak fit", unc: "turn 0.3 %, block 0.1 % of suction pressure; follows the line transmitters"},

		eTDischarge: {name: "t_discharge_c", unit: "°C", class: Temperature, scale: one, shift: zeroC, what: "discharge temperature of the stage, as measured",
			source: "process value", valid: "discharge temperature known, the end delivers", unc: "thermometer; lags a change of load by minutes", eye: true},
		eSuctionExpected: {name: "suction_expected_deg", unit: "°", class: Pressure, scale: one, what: "suction opening of a sealed cylinder",
			how: "where V_close (p_close/p_open)^(1/KV) lies, from this turn's plateaus", source: "windows.md 3", valid: "plateaus and KV known", unc: "KV by 0.01: 0.2° at ratio 2.5", eye: true},
		eDischargeExpected: {name: "discharge_expected_deg", unit: "°", class: Pressure, scale: one, what: "discharge opening of a sealed cylinder",
			how: "likewise", source: "windows.md 3", valid: "plateaus and KV known", unc: "KV by 0.01: 0.4° at ratio 2.5", eye: true},
		eUndershoot: {name: "suction_undershoot_percent", unit: "%", class: Pressure, scale: percent, what: "how far the pressure falls below the suction plateau to open the valves",
			how: "1 − p_min/plateau within 25° of the opening", source: srcBloch + " p. 137: 5 to 15 % is usual", valid: "opening found on this turn", unc: "turn 0.1 to 0.2; passage ringing that is not undone", eye: true},
		eOvershoot: {name: "discharge_overshoot_percent", unit: "%", class: Pressure, scale: percent, what: "how far the pressure rises above the discharge plateau to open the valves",
			how: "p_max/plateau − 1 within 25° of the opening", source: srcBloch + " p. 137: 5 to 15 % is usual", valid: "opening found on this turn", unc: "likewise", eye: true},
		ePulseS: {name: "suction_pulsation_percent", unit: "%", class: Pressure, scale: percent, what: "pulsation on the suction plateau",
			how: "highest less lowest pressure 26 to 3° before the outer dead centre, of the plateau; what is left of the valve's drop is in it", source: srcOwn, valid: "end works", unc: "turn 0.04 to 0.2", eye: true},
		ePulseD: {name: "discharge_pulsation_percent", unit: "%", class: Pressure, scale: percent, what: "pulsation on the discharge plateau",
			how: "likewise 20 to 3° before the inner one", source: srcOwn, valid: delivers, unc: "likewise", eye: true},
		eRise: {name: "p_rise_bar_deg", unit: "bar/°", class: Pressure, scale: bar, what: "steepest rise of the pressure",
			how: "difference over 2°, over 0…360°", source: srcOwn, valid: "always", unc: "turn 0.4 to 1.5 %", eye: true},
		eFall: {name: "p_fall_bar_deg", unit: "bar/°", class: Pressure, scale: bar, what: "steepest fall of the pressure, negative",
			how: "likewise", source: srcOwn, valid: "always", unc: "likewise", eye: true},
		eStraightComp: {name: "comp_scatter_percent", unit: "%", class: Pressure, scale: percent, what: "straightness of the compression line",
			how: "scatter of ln p about the line ln p over ln V of the closed stroke", source: "windows.md 2", valid: "closed stroke found", unc: "noise and pulsation are in it", eye: true},
		eStraightExp: {name: "exp_scatter_percent", unit: "%", class: Pressure, scale: percent, what: "straightness of the expansion line",
			how: "likewise", source: "windows.md 2", valid: "closed stroke found", unc: "likewise", eye: true},
		eClearance: {name: "clearance_percent", unit: "%", class: Pressure, scale: percent, what: "clearance that the expansion implies",
			how: "p^(−1/KV) against displaced volume is a straight line: where it meets zero, of the swept volume", source: "closed form", valid: "closed stroke found, KV known",
			unc: "turn 0.01 points; dead centre, zero, KV and leaks move it", eye: true},
		eLossShareS: {name: "suction_loss_percent", unit: "%", class: Pressure, scale: percent, what: "suction valves' share of the indicated power",
			source: srcBrun, valid: "loss known, end does work", unc: "as suction_loss_kw", eye: true},
		eLossShareD: {name: "discharge_loss_percent", unit: "%", class: Pressure, scale: percent, what: "discharge valves' share of the indicated power",
			source: srcBrun, valid: "loss known, end does work", unc: "as discharge_loss_kw", eye: true},
		eNormS: {name: "capacity_suction_nm3_h", unit: "Nm³/h", class: Pressure, scale: perHour, what: "capacity by suction as normal volume",
			how: "at 0 °C, 101.325 kPa (DIN 1343), real gas; × 1.055 for 15 °C (ISO 13443)", source: "DIN 1343, from memory", valid: gasAndT, unc: "as capacity_suction_kg_h", eye: true},
		eNormD: {name: "capacity_discharge_nm3_h", unit: "Nm³/h", class: Pressure, scale: perHour, what: "capacity by discharge as normal volume",
			how: "likewise", source: "DIN 1343, from memory", valid: "gas and a temperature known", unc: "as capacity_discharge_kg_h", eye: true},
		eDelivered: {name: "delivered_kg_h", unit: "kg/h", class: Pressure, scale: perHour, what: "gas delivered: taken in by the end's energy balance, heat and leaks taken off",
			how: "Δ(pV)/KV + (KV−1)/KV ∫p dV from the expansion to the compression line over Zs R Ts, less heat and leaks by a fit with priors to the bends of the closed strokes", source: "first law for an open system; Woschni 1967 (from memory) for the film's exponents",
			valid: "both closed strokes found, " + gasAndT, unc: "delivered_u_percent; median of 13 turns 1.4 % at 95 % on the model, see the figures above; a turn 0.1 to 0.6 %", eye: true},
		eDeliveredNorm: {name: "delivered_nm3_h", unit: "Nm³/h", class: Pressure, scale: perHour, what: "gas delivered as normal volume",
			how: "as capacity_suction_nm3_h", source: "DIN 1343, from memory", valid: "as delivered_kg_h", unc: "as delivered_kg_h", eye: true},
		eEfficiency: {name: "isentropic_efficiency_percent", unit: "%", class: Pressure, scale: percent, what: "isentropic efficiency from line to line",
			how: "delivered mass times the real gas's isentropic enthalpy rise between the lines, over indicated power", source: srcBrun + " p. 209",
			valid: "as delivered_kg_h, line pressures known", unc: "delivered_kg_h and indicated_power_kw; turn 0.4 to 0.8 points", eye: true},
		eSpecific: {name: "specific_energy_kwh_1000nm3", unit: "kWh/1000 Nm³", class: Pressure, scale: 1 / 3600.0, what: "indicated energy for gas delivered",
			how: "indicated power over delivered_nm3_h", source: "trade usage", valid: "as delivered_kg_h", unc: "likewise", eye: true},
		ePowerU: {name: "power_u_percent", unit: "%", class: Pressure, scale: percent, what: "what the angle scale leaves open in the indicated power",
			how: "slope dW/dθ of this very trace times U over W, U the turn's angle uncertainty (95 %)", source: "first order", valid: "end does work", unc: "–", eye: true},
		eVeSU: {name: "ve_suction_u_percent", unit: "points", class: Pressure, scale: percent, what: "what the angle scale leaves open in ve_suction_percent",
			how: "slope dV/dθ at the opening times U, over swept volume", source: "first order", valid: "as ve_suction_percent", unc: "–", eye: true},
		eVeDU: {name: "ve_discharge_u_percent", unit: "points", class: Pressure, scale: percent, what: "what the angle scale leaves open in ve_discharge_percent",
			how: "likewise", source: "first order", valid: "as ve_discharge_percent", unc: "–", eye: true},
		eDeliveredU: {name: "delivered_u_percent", unit: "%", class: Pressure, scale: percent, what: "what stays open in delivered_kg_h, of it",
			how: "the standard deviation that the fit of heat and leaks leaves", source: "linear least squares with priors", valid: "as delivered_kg_h", unc: "–", eye: true},
	}
}
