// Package measure condenses a turn and its windows into features, each with a unit, a definition and a rule of validity.
//
// It needs: a turn, its windows, and per throw the cylinder, the line values and the gas.
// It waits: not at all; every turn answers for itself, with templates and 45 turns of extra hits remembered.
// It emits: one Vector a turn, in SI units, aligned to a Layout that is fixed for a machine.
// When it cannot: the value is NaN and Why says the reason; an invalid turn has its own reason everywhere.
//
// What people read is value·Scale + Shift of the layout; the names carry that unit. Angles are degrees of crank rotation
// after the throw's head-end dead centre. What each feature is, when it is there, what it is uncertain by and where it
// comes from is listed below, made of the tables in define_….go. Features that are arithmetic of others, or too
// restless, are for the eye: no baseline is learnt of them, so that no evidence counts twice.
//
// # Events that ring into each other
//
// While an event stands alone its template is learnt: band powers over time. Two events that do not stand alone are
// unmixed by their templates where both have been learnt (Sharing, Mark). Closings hardly ever stand alone and stay
// shared. On the modelled machine, head-end suction opening (first figure) and crank-end discharge opening (second)
// moved across each other, six draws of valves at 600 and 900 rpm (TestOverlappingEventsAreToldApart -sweep):
//
//	gap ms      turns  alone      separated  one-sided  one sum  booked      ln error, rms
//	0   … 0.4     423     0    0     1    1  159  159  263  263     0  160      –  0.14
//	0.4 … 0.8     408     0    0    69   69  149  149  190  190    68  218   0.23  0.10
//	0.8 … 1.3     523     0    0   328  328   58   58  137  137   328  386   0.13  0.08
//	1.3 … 2       740     0    0   677  677    2    2   61   61   677  679   0.11  0.06
//	2   … 3      1117    11  275  1039  775    0    0   67   67  1050 1050   0.08  0.05
//	3   … 4      1356   227  983  1074  342    0    0   55   31  1301 1325   0.06  0.03
//
// The error is against the same machine with only one of the two groups felt.
//
// The features,
// made of the definitions by go test -run TestTable -args -update:
//
// # Features: throw
//
// Subject t1: absent while an end that works has no sound pressure, unless the line says otherwise.
//
//	rod_load_max_kn [kN, pressure] largest combined rod load at the crosshead pin, compression: gas load less inertia of piston, rod and crosshead, at the instantaneous speed
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: gain of the transmitters, masses; turn 0.1 to 0.2 %
//	rod_load_min_kn [kN, pressure] least combined rod load at the crosshead pin, tension negative: likewise
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: gain of the transmitters, masses; turn 0.1 to 0.2 %
//	gas_load_max_kn [kN, pressure] largest gas rod load, compression: p_HE A_HE − p_CE A_CE − p_atm (A_HE − A_CE)
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: gain of the transmitters
//	gas_load_min_kn [kN, pressure] least gas rod load, tension negative: likewise
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: gain of the transmitters
//	reversal_deg [°, pressure] longest unbroken stay of the pin load in its shorter direction: at least 15° are asked for
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: reversal_u_deg; turn 0.01 to 0.05°
//	reversal_percent [%, pressure] peak of the pin load's lesser direction over that of the greater: at least 3 % are asked for
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: gain of the transmitters, masses; turn 0.1 to 0.2 %
//	pin_pulls_deg [°, pressure] the pin load turns from compression to tension
//		source: vibration.md 2. there when: once a turn. uncertain by: U; turn 0.01 to 0.05°; 3° where the load stays near zero for long, see reversal_u_deg
//	pin_pushes_deg [°, pressure] the pin load turns from tension to compression
//		source: vibration.md 2. there when: once a turn. uncertain by: U; turn 0.01 to 0.05°; 3° where the load stays near zero for long, see reversal_u_deg
//	power_kw [kW, pressure] indicated power of both ends: idle ends with what they take
//		source: methods.md 1.1. there when: every working end known. uncertain by: as those of the ends
//	capacity_kg_h [kg/h, pressure] capacity by suction of both ends: an idle end counts nothing
//		source: methods.md 1.1. there when: every working end known. uncertain by: as those of the ends
//	leak_phase_deg [°, pressure] phase shift that the leak fit finds, to be added to the angles
//		source: leaks.md. there when: leak fit. uncertain by: turn 0.03 to 0.1°
//	leak_residual [1, pressure] what the leak fit leaves over, in ln p
//		source: leaks.md. there when: leak fit. uncertain by: –
//	piston_rod_max_kn [kN, pressure] largest load in the piston rod at the crosshead, compression: gas load less inertia of piston and rod
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: gain of the transmitters, masses; turn 0.1 to 0.2 %
//	piston_rod_min_kn [kN, pressure] least load in the piston rod at the crosshead, tension negative: likewise
//		source: API 618 6.6 (handbook.md 1). there when: both ends' pressures, or one blind by design. uncertain by: gain of the transmitters, masses; turn 0.1 to 0.2 %
//	rod_load_compression_rated_percent [%, pressure] rod_load_max_kn as share of the rated load: 0 where the pin is never pushed
//		source: skid file, rod_load_compression_kn. there when: rated load given. uncertain by: gain of the transmitters, masses; turn 0.1 to 0.2 %
//	rod_load_tension_rated_percent [%, pressure] rod_load_min_kn as share of the rated load: 0 where the pin is never pulled
//		source: skid file, rod_load_tension_kn. there when: rated load given. uncertain by: gain of the transmitters, masses; turn 0.1 to 0.2 %
//	valve_loss_kw [kW, pressure] power lost in all valves of the throw
//		source: Brun & Kurz 2019. there when: every delivering end known. uncertain by: as those of the ends
//	valve_loss_percent [%, pressure] valves' share of power_kw
//		source: Brun & Kurz 2019. there when: every delivering end known. uncertain by: as those of the ends
//	delivered_kg_h [kg/h, pressure] gas delivered by both ends, heat and leaks taken off: an idle end counts nothing
//		source: mass balance of the ends. there when: every delivering end known. uncertain by: as those of the ends
//	delivered_nm3_h [Nm³/h, pressure] gas delivered by both ends as normal volume: 0 °C, 101.325 kPa (DIN 1343), real gas
//		source: DIN 1343, from memory. there when: every delivering end known. uncertain by: as those of the ends
//	isentropic_efficiency_percent [%, pressure] isentropic efficiency of the throw from line to line: as of an end; idle ends' power counts
//		source: Brun & Kurz 2019 p. 209. there when: every delivering end and the lines known. uncertain by: as those of the ends
//	specific_energy_kwh_1000nm3 [kWh/1000 Nm³, pressure] indicated energy for gas delivered: power_kw over delivered_nm3_h
//		source: trade usage. there when: every delivering end known. uncertain by: as those of the ends
//	reversal_u_deg [°, pressure] what transmitters and the angle scale leave open in reversal_deg: 95 %: reversal taken anew with zeros off by 0.3 % of suction pressure, gains by 0.2 %, the angle by half of U, each in turn to either side; root of the sum of squares, twice
//		source: first order, jumps in it. there when: both ends' pressures, or one blind by design. uncertain by: –
//
// # Features: end
//
// Subject t1.he, t1.ce: absent without a sound, positive pressure; beyond the extremes, work and power absent on an idle end, too.
//
//	p_suction_bar_abs [bar, pressure] suction plateau in the cylinder: median 26 to 3° before the outer dead centre
//		source: windows.md 3. there when: also on an idle end. uncertain by: transmitter (zero and gain); turn 0.02 to 0.05 %
//	p_discharge_bar_abs [bar, pressure] discharge plateau in the cylinder: median 20 to 3° before the inner dead centre
//		source: windows.md 3. there when: end delivers. uncertain by: transmitter (zero and gain); turn 0.02 to 0.05 %
//	p_min_bar_abs [bar, pressure] lowest pressure of the turn: over 0…360°
//		source: own definition. there when: always. uncertain by: transmitter; noise of one point
//	p_max_bar_abs [bar, pressure] highest pressure of the turn: over 0…360°
//		source: own definition. there when: always. uncertain by: transmitter; noise of one point
//	ratio_plateau [1, pressure] pressure ratio in the cylinder: discharge over suction plateau
//		source: methods.md 1.1. there when: end delivers. uncertain by: zero error at suction, as a share
//	ratio_line [1, process] pressure ratio of the lines
//		source: methods.md 1.1. there when: line pressures known. uncertain by: line transmitters; up to 1 s late
//	suction_opens_deg [°, pressure] suction valves open: lasting departure from the closed line
//		source: windows.md 2. there when: found on this turn. uncertain by: U; turn 0.1 to 0.3° suction, 0.06 to 0.2° discharge; against the truth see Windows, measured
//	suction_closes_deg [°, pressure] suction valves close: walked back along the closed line
//		source: windows.md 2. there when: found on this turn. uncertain by: suction ill-conditioned at full load (3 to 9°), discharge 1 to 2°
//	discharge_opens_deg [°, pressure] discharge valves open: lasting departure from the closed line
//		source: windows.md 2. there when: found on this turn. uncertain by: U; turn 0.1 to 0.3° suction, 0.06 to 0.2° discharge; against the truth see Windows, measured
//	discharge_closes_deg [°, pressure] discharge valves close: walked back along the closed line
//		source: windows.md 2. there when: found on this turn. uncertain by: suction ill-conditioned at full load (3 to 9°), discharge 1 to 2°
//	suction_opens_late_deg [°, pressure] suction opening later than a sealed cylinder's: closed line ∩ plateau, minus that of V_close (p_close/p_open)^(1/KV)
//		source: windows.md 2, 3. there when: following. uncertain by: turn 0.01 to 0.02°, block under load swings 0.05 to 0.09°; a zero error moves it
//	discharge_opens_late_deg [°, pressure] discharge opening later than a sealed cylinder's: as suction_opens_late_deg
//		source: windows.md 2, 3. there when: following. uncertain by: turn 0.01 to 0.02°, block under load swings 0.05 to 0.09°; a zero error moves it
//	suction_loss_kw [kW, pressure] power lost in the suction valves: ∫(p_line − p)dV from the opening to the dead centre and on to a late closing, times turns a second; the plateau where no line is known
//		source: Brun & Kurz 2019. there when: opening found. uncertain by: the line's pressure against the transmitter's zero: 0.3 % of the pressure is up to 10 % of the loss; turn 0.02 to 0.12 % of indicated power
//	discharge_loss_kw [kW, pressure] power lost in the discharge valves: ∫(p − p_line)(−dV), likewise
//		source: Brun & Kurz 2019. there when: opening found. uncertain by: the line's pressure against the transmitter's zero: 0.3 % of the pressure is up to 10 % of the loss; turn 0.02 to 0.12 % of indicated power
//	indicated_work_j [J, pressure] indicated work of one turn: −∮p dV over 0…360°, trapezoids; positive for work done on the gas
//		source: methods.md 1.1. there when: always. uncertain by: as indicated_power_kw
//	indicated_power_kw [kW, pressure] indicated power: work times turns a second
//		source: methods.md 1.1. there when: always. uncertain by: power_u_percent for the angle, the transmitter's gain one to one; the rest 0.02 %
//	mean_pressure_bar [bar, pressure] mean effective pressure: work over swept volume
//		source: worked/ex2. there when: always. uncertain by: as indicated_power_kw
//	ve_suction_percent [%, pressure] volumetric efficiency by suction: (V_trapped − V_opens)/V_swept; V_trapped where the compression line meets the suction plateau: it holds for early, full and late closing
//		source: methods.md 1.1. there when: suction opening and compression line found. uncertain by: ve_suction_u_percent for the angle; turn 0.01 to 0.06 points
//	ve_discharge_percent [%, pressure] volumetric efficiency by discharge: (V_opens − V_clearance)/V_swept
//		source: methods.md 1.1. there when: discharge opening found. uncertain by: ve_discharge_u_percent for the angle; clearance does not enter
//	capacity_suction_kg_h [kg/h, pressure] capacity by suction: VE_s V_swept p_s/(Zs R Ts) n; suction plateau, line temperature
//		source: methods.md 1.1. there when: gas and suction temperature known. uncertain by: ve and pressure; charge heating and the leaks of a healthy machine make it read 0.5 to 3 % high, with hydrogen and slowly up to 14 %
//	capacity_discharge_kg_h [kg/h, pressure] capacity by discharge: VE_d V_swept p_d/(Zd R Td) n; measured Td, adiabatic where none is known
//		source: methods.md 1.1. there when: gas and a temperature known. uncertain by: ve and pressure; charge heating and the leaks of a healthy machine make it read 0.5 to 3 % high, with hydrogen and slowly up to 14 %
//	flow_balance [1, pressure] suction flow over discharge flow: always with the adiabatic Td: a thermometer lags by minutes
//		source: methods.md 1.1. there when: gas and suction temperature known. uncertain by: healthy 0.988 to 0.997 on the model; drifts with temperature, 0.013 a block
//	n_comp_early [1, pressure] exponent of early compression: −d ln p/d ln V by least squares, from 8 % of ln(pd/ps) to the middle
//		source: methods.md 1.1. there when: 6 points. uncertain by: turn 0.0004 to 0.003; dead centre 0.023 (compression) and 0.017 (expansion) a degree, clearance 0.016 and 0.051 a point (worked/ex4, ex5)
//	n_comp_late [1, pressure] exponent of late compression: from the middle to 92 %
//		source: methods.md 1.1. there when: 6 points. uncertain by: turn 0.0004 to 0.003; dead centre 0.023 (compression) and 0.017 (expansion) a degree, clearance 0.016 and 0.051 a point (worked/ex4, ex5)
//	n_exp_early [1, pressure] exponent of early expansion: from 92 % down to the middle: high pressure comes first
//		source: methods.md 1.1. there when: 6 points. uncertain by: turn 0.0004 to 0.003; dead centre 0.023 (compression) and 0.017 (expansion) a degree, clearance 0.016 and 0.051 a point (worked/ex4, ex5)
//	n_exp_late [1, pressure] exponent of late expansion: from the middle down to 8 %
//		source: methods.md 1.1. there when: 6 points. uncertain by: turn 0.0004 to 0.003; dead centre 0.023 (compression) and 0.017 (expansion) a degree, clearance 0.016 and 0.051 a point (worked/ex4, ex5)
//	n_comp_early_se [1, pressure] standard error of n_comp_early: for independent residuals
//		source: least squares. there when: 6 points. uncertain by: bend and pulsation are in it: turns scatter by half of it
//	n_comp_late_se [1, pressure] standard error of n_comp_late: likewise
//		source: least squares. there when: 6 points. uncertain by: likewise
//	n_exp_early_se [1, pressure] standard error of n_exp_early: likewise
//		source: least squares. there when: 6 points. uncertain by: likewise
//	n_exp_late_se [1, pressure] standard error of n_exp_late: likewise
//		source: least squares. there when: 6 points. uncertain by: likewise
//	mass_comp_percent [%, pressure] apparent gain of gas while compressing: Δm/m = Δ(ln p + KV ln V)/KV, first to last tenth of the stroke
//		source: leaks.md. there when: 12 points, KV known. uncertain by: wall heat and a wrong clearance read as gas; turn 0.01 to 0.03, block under load swings 0.05
//	mass_exp_percent [%, pressure] apparent gain of gas while expanding: over the expansion
//		source: leaks.md. there when: 12 points, KV known. uncertain by: likewise
//	t_adiabatic_c [°C, process] discharge temperature of an adiabatic compression: Ts (pd/ps)^((KT−1)/KT) over the plateaus
//		source: Bloch & Hoefner 1996 A-1. there when: gas and suction temperature known. uncertain by: suction thermometer; 0.8 K a per cent of ratio
//	t_excess_k [K, temperature] measured discharge temperature above the adiabatic one
//		source: methods.md 1.1. there when: discharge temperature known. uncertain by: thermometers; lags a change of load by minutes
//	leak_zero_bar [bar, pressure] pressure zero that the leak fit finds: the transducer reads this much too high
//		source: leaks.md. there when: leak fit. uncertain by: turn 0.3 %, block 0.1 % of suction pressure; follows the line transmitters
//	t_discharge_c [°C, temperature] discharge temperature of the stage, as measured
//		source: process value. there when: discharge temperature known, the end delivers. uncertain by: thermometer; lags a change of load by minutes
//	suction_expected_deg [°, pressure] suction opening of a sealed cylinder: where V_close (p_close/p_open)^(1/KV) lies, from this turn's plateaus
//		source: windows.md 3. there when: plateaus and KV known. uncertain by: KV by 0.01: 0.2° at ratio 2.5
//	discharge_expected_deg [°, pressure] discharge opening of a sealed cylinder: likewise
//		source: windows.md 3. there when: plateaus and KV known. uncertain by: KV by 0.01: 0.4° at ratio 2.5
//	suction_undershoot_percent [%, pressure] how far the pressure falls below the suction plateau to open the valves: 1 − p_min/plateau within 25° of the opening
//		source: Bloch & Hoefner 1996 p. 137: 5 to 15 % is usual. there when: opening found on this turn. uncertain by: turn 0.1 to 0.2; passage ringing that is not undone
//	discharge_overshoot_percent [%, pressure] how far the pressure rises above the discharge plateau to open the valves: p_max/plateau − 1 within 25° of the opening
//		source: Bloch & Hoefner 1996 p. 137: 5 to 15 % is usual. there when: opening found on this turn. uncertain by: likewise
//	suction_pulsation_percent [%, pressure] pulsation on the suction plateau: highest less lowest pressure 26 to 3° before the outer dead centre, of the plateau; what is left of the valve's drop is in it
//		source: own definition. there when: end works. uncertain by: turn 0.04 to 0.2
//	discharge_pulsation_percent [%, pressure] pulsation on the discharge plateau: likewise 20 to 3° before the inner one
//		source: own definition. there when: end delivers. uncertain by: likewise
//	p_rise_bar_deg [bar/°, pressure] steepest rise of the pressure: difference over 2°, over 0…360°
//		source: own definition. there when: always. uncertain by: turn 0.4 to 1.5 %
//	p_fall_bar_deg [bar/°, pressure] steepest fall of the pressure, negative: likewise
//		source: own definition. there when: always. uncertain by: likewise
//	comp_scatter_percent [%, pressure] straightness of the compression line: scatter of ln p about the line ln p over ln V of the closed stroke
//		source: windows.md 2. there when: closed stroke found. uncertain by: noise and pulsation are in it
//	exp_scatter_percent [%, pressure] straightness of the expansion line: likewise
//		source: windows.md 2. there when: closed stroke found. uncertain by: likewise
//	clearance_percent [%, pressure] clearance that the expansion implies: p^(−1/KV) against displaced volume is a straight line: where it meets zero, of the swept volume
//		source: closed form. there when: closed stroke found, KV known. uncertain by: turn 0.01 points; dead centre, zero, KV and leaks move it
//	suction_loss_percent [%, pressure] suction valves' share of the indicated power
//		source: Brun & Kurz 2019. there when: loss known, end does work. uncertain by: as suction_loss_kw
//	discharge_loss_percent [%, pressure] discharge valves' share of the indicated power
//		source: Brun & Kurz 2019. there when: loss known, end does work. uncertain by: as discharge_loss_kw
//	capacity_suction_nm3_h [Nm³/h, pressure] capacity by suction as normal volume: at 0 °C, 101.325 kPa (DIN 1343), real gas; × 1.055 for 15 °C (ISO 13443)
//		source: DIN 1343, from memory. there when: gas and suction temperature known. uncertain by: as capacity_suction_kg_h
//	capacity_discharge_nm3_h [Nm³/h, pressure] capacity by discharge as normal volume: likewise
//		source: DIN 1343, from memory. there when: gas and a temperature known. uncertain by: as capacity_discharge_kg_h
//	delivered_kg_h [kg/h, pressure] gas delivered: taken in by the end's energy balance, heat and leaks taken off: Δ(pV)/KV + (KV−1)/KV ∫p dV from the expansion to the compression line over Zs R Ts, less heat and leaks by a fit with priors to the bends of the closed strokes
//		source: first law for an open system; Woschni 1967 (from memory) for the film's exponents. there when: both closed strokes found, gas and suction temperature known. uncertain by: delivered_u_percent; median of 13 turns 1.4 % at 95 % on the model, see the figures above; a turn 0.1 to 0.6 %
//	delivered_nm3_h [Nm³/h, pressure] gas delivered as normal volume: as capacity_suction_nm3_h
//		source: DIN 1343, from memory. there when: as delivered_kg_h. uncertain by: as delivered_kg_h
//	isentropic_efficiency_percent [%, pressure] isentropic efficiency from line to line: delivered mass times the real gas's isentropic enthalpy rise between the lines, over indicated power
//		source: Brun & Kurz 2019 p. 209. there when: as delivered_kg_h, line pressures known. uncertain by: delivered_kg_h and indicated_power_kw; turn 0.4 to 0.8 points
//	specific_energy_kwh_1000nm3 [kWh/1000 Nm³, pressure] indicated energy for gas delivered: indicated power over delivered_nm3_h
//		source: trade usage. there when: as delivered_kg_h. uncertain by: likewise
//	power_u_percent [%, pressure] what the angle scale leaves open in the indicated power: slope dW/dθ of this very trace times U over W, U the turn's angle uncertainty (95 %)
//		source: first order. there when: end does work. uncertain by: –
//	ve_suction_u_percent [points, pressure] what the angle scale leaves open in ve_suction_percent: slope dV/dθ at the opening times U, over swept volume
//		source: first order. there when: as ve_suction_percent. uncertain by: –
//	ve_discharge_u_percent [points, pressure] what the angle scale leaves open in ve_discharge_percent: likewise
//		source: first order. there when: as ve_discharge_percent. uncertain by: –
//	delivered_u_percent [%, pressure] what stays open in delivered_kg_h, of it: the standard deviation that the fit of heat and leaks leaves
//		source: linear least squares with priors. there when: as delivered_kg_h. uncertain by: –
//
// # Features: leak path
//
// Subject t1.he.suction, t1.rings: absent without a gas; rings need both ends at work.
//
//	leak_area_mm2 [mm², pressure] effective leak area by the leak fit, signed
//		source: leaks.md. there when: leak fit. uncertain by: see Leak areas, measured; wall heat is in it: compare with the healthy machine
//	leak_percent [%, pressure] gas through that area in a turn, per cent of the path's throughput, signed: over what the path's end (rings: both ends) takes in, by suction
//		source: leaks.md. there when: leak fit, throughput known. uncertain by: see Leak areas, measured; wall heat is in it: compare with the healthy machine
//	leak_noise_db [dB, vibration] leak-band level where this path would leak most, dB over 1 (m/s²)²: 10 ⟨w lg y⟩/⟨w⟩, y mean square at 10 to 20 kHz on the degrees free of events, w = max(0, S − ⟨S⟩), S the path's nozzle flow
//		source: vibration.md 3. there when: accelerometer; 40° free of events. uncertain by: turn 0.2 to 0.4 dB at constant duty
//	leak_shape [1, vibration] projection of the leak-band noise on the path's own leak flow: ⟨(S − ⟨S⟩) y⟩/(σ(S)⟨y⟩)
//		source: vibration.md 3. there when: as leak_noise_db. uncertain by: names the pair, not its member
//
// # Features: valve event
//
// Subject t1.he.suction.opens: throws with an accelerometer; absent while it is suspect or the window is lost.
//
//	peak_g [g, vibration] largest acceleration in the window: of both events where the window is shared
//		source: vibration.md 1. there when: window known. uncertain by: turn 15 to 28 %
//	rms_g [g, vibration] effective acceleration in the window: of both events where the window is shared
//		source: vibration.md 1. there when: window known. uncertain by: turn 10 to 19 %
//	onset_deg [°, vibration] angle at which the impact begins: first envelope over max(0.35 peak, 4 backgrounds)
//		source: vibration.md 1. there when: no other event may be meant. uncertain by: turn 0.02 to 0.07°, and U
//	lag_ms [ms, vibration] impact after the pressure's event
//		source: windows.md 2. there when: both found. uncertain by: turn 0.03 to 0.13° as time
//	impact_ln [ln m/s², vibration] ln of the effective acceleration in m/s² over 3 ms from the onset, background removed: ln √(mean square − background²); events that ring into each other by templates, where these differ enough
//		source: vibration.md 1. there when: 6 dB above the background; alone, separated or the stronger of two. uncertain by: turn 0.10 to 0.17; unmixed 0.05 to 0.23
//	centroid_deg [°, vibration] middle of the impact's energy: over the same 3 ms
//		source: vibration.md 1. there when: impact 6 dB above the background, alone in its window. uncertain by: turn 0.1 to 0.75°
//	crest [1, vibration] peak over effective acceleration of the impact: over the same 3 ms
//		source: vibration.md 1. there when: impact 6 dB above the background, alone in its window. uncertain by: follows the length of the window
//	ringdown_ms [ms, vibration] time constant of the impact's decay: envelope from its peak to max(5 % of it, 3 backgrounds)
//		source: vibration.md 1. there when: impact 6 dB above the background, alone in its window. uncertain by: turn 8 to 60 %
//	band_low_db [dB, vibration] impact at 2 to 5 kHz, dB over 1 (m/s²)²: mean square over the same 3 ms
//		source: vibration.md 1. there when: impact 6 dB above the background, alone in its window. uncertain by: as impact_ln, background in it
//	band_mid_db [dB, vibration] impact at 5 to 10 kHz, dB over 1 (m/s²)²: likewise
//		source: vibration.md 1. there when: impact 6 dB above the background, alone in its window. uncertain by: as impact_ln, background in it
//	band_high_db [dB, vibration] impact at 10 to 20 kHz, dB over 1 (m/s²)²: likewise
//		source: vibration.md 1. there when: impact 6 dB above the background, alone in its window. uncertain by: as impact_ln, background in it
//	opening_slope_bar_s [bar/s, pressure] slope of the cylinder pressure ahead of the opening: line over 7 to 1.5° before it, in time; openings only
//		source: vibration.md 1. there when: opening found. uncertain by: 1 %
//	impact_norm_ln [ln, vibration] impact_ln less what the pressure slope at opening gives it: impact_ln − 0.45 ln(slope in bar/s); openings only
//		source: vibration.md 1. there when: as impact_ln, slope known. uncertain by: 15-turn medians within 0.25 under load swings
//	extra_hits [1, vibration] hits after the opening: peaks over 2.5 times the median envelope 0.4 to 1.6 ms before them, from 2 ms to 42° after the onset, known events of all throws left out; openings only
//		source: vibration.md 4. there when: onset found. uncertain by: counting
//	extra_hits_45 [1, vibration] hits after the opening in the last 45 turns that could be heard: their sum; openings only
//		source: vibration.md 4. there when: heard in enough turns. uncertain by: √ of the count
//
// # Features: valve
//
// Subject t1.he.s1: valves with a cover sensor.
//
//	cover_c [°C, temperature] cover temperature
//		source: process value. there when: value known. uncertain by: thermometer; lags by a minute or more
//	cover_above_group_k [K, temperature] cover temperature above the middle of the other valves of its kind: suction or discharge valves of the same stage
//		source: methods.md 1.2. there when: another of its kind known. uncertain by: differences of place: learn them
//
// Sources: methods.md section 1 (published definitions and magnitudes), leaks.md and vibration.md of the measured advice.
package measure
