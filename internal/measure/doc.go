// Package measure condenses a turn and its windows into features, each with a unit, a definition and a rule of validity.
//
// It needs: a turn, its windows, and per throw the cylinder, the line values and the gas.
// It waits: not at all; every turn answers for itself, with templates and 45 turns of extra hits remembered.
// It emits: one Vector a turn, in SI units, aligned to a Layout that is fixed for a machine.
// When it cannot: the value is NaN and Why says the reason; an invalid turn has its own reason everywhere.
//
// What people read is value·Scale + Shift of the layout; the names carry that unit. Angles are degrees of crank rotation
// after the throw's head-end dead centre.
//
// # Features of an end (subject t1.he, t1.ce)
//
//	p_suction_bar_abs         median of the cylinder pressure 26…3° before the outer dead centre
//	p_discharge_bar_abs       the same 20…3° before the inner one; absent when the end does not deliver
//	p_min_bar_abs             lowest pressure of the turn; p_max_bar_abs the highest; both also on an idle end
//	p_max_bar_abs
//	ratio_plateau             discharge over suction plateau
//	ratio_line                the same of the lines (class process)
//	suction_opens_deg         lasting departure from the closed line; absent unless found on this turn
//	suction_closes_deg        walked back along the closed line; ill-conditioned at full load
//	discharge_opens_deg       as suction_opens_deg
//	discharge_closes_deg      as suction_closes_deg, and better conditioned
//	suction_opens_late_deg    closed line ∩ plateau, minus that of a sealed cylinder: V_close (p_close/p_open)^(1/K)
//	discharge_opens_late_deg  the same
//	suction_loss_kw           ∫(p_line − p)dV from opening to closing, times turns a second; plateau where no line is known
//	discharge_loss_kw         ∫(p − p_line)(−dV), likewise
//	indicated_work_j          −∮p dV over 0…360°, positive for work done on the gas; also on an idle end
//	indicated_power_kw        that times turns a second
//	mean_pressure_bar         that over the swept volume
//	ve_suction_percent        (V_trapped − V at suction opening)/V_swept; V_trapped where the compression line meets the
//	                          suction plateau: it holds for early, full and late closing
//	ve_discharge_percent      (V at discharge opening − V_clearance)/V_swept
//	capacity_suction_kg_h     VE_s V_swept p_s/(Zs R Ts), suction plateau and line temperature
//	capacity_discharge_kg_h   VE_d V_swept p_d/(Zd R Td), measured Td, adiabatic where none is known
//	flow_balance              suction over discharge flow, always with the adiabatic Td: a thermometer lags by minutes
//	n_comp_early              −d ln p/d ln V by least squares, from 8 % of ln(pd/ps) to the middle; at least 6 points
//	n_comp_late               from the middle to 92 %
//	n_exp_early               expansion, from 92 % down to the middle (high pressure comes first)
//	n_exp_late                expansion, from the middle down to 8 %
//	n_comp_early_se           standard errors of the four, for independent residuals
//	n_comp_late_se
//	n_exp_early_se
//	n_exp_late_se
//	mass_comp_percent         apparent gain of gas Δm/m = Δ(ln p + k ln V)/k over the compression, first to last tenth
//	mass_exp_percent          over the expansion
//	t_adiabatic_c             Ts (pd/ps)^((KT−1)/KT) over the plateaus (class process)
//	t_excess_k                measured discharge temperature above it (class temperature)
//	leak_zero_bar             pressure zero by the leak fit: the transducer reads this much too high
//
// # Features of a throw (subject t1)
//
//	rod_load_max_kn           combined load at the crosshead pin, compression positive; needs both ends' pressures, or a
//	                          second end idle by design (then at suction pressure)
//	rod_load_min_kn           its least value, tension negative
//	gas_load_max_kn           gas load alone
//	gas_load_min_kn
//	reversal_deg              longest unbroken stay of the pin load in its shorter direction
//	reversal_percent          peak of the lesser direction over that of the greater
//	pin_pulls_deg             the pin load goes from compression to tension; absent unless it does so once a turn
//	pin_pushes_deg            back to compression
//	power_kw                  both ends
//	capacity_kg_h             both ends, by suction; an idle end counts nothing
//	leak_phase_deg            phase shift by the leak fit
//	leak_residual             what the fit leaves, in ln p
//
// # Features of a valve event (subject t1.he.suction.opens …), where the throw has an accelerometer
//
//	peak_g                    largest acceleration in the window; of both events where the window is shared
//	rms_g                     effective acceleration in the window; likewise
//	onset_deg                 first envelope over max(0.35 peak, 4 backgrounds); absent where another event may be meant
//	lag_ms                    onset after the angle that the pressure shows
//	impact_ln                 ln √(mean square over 3 ms from the onset − background²), m/s²; absent under 6 dB; where two
//	                          events ring into each other by templates, if these are different enough (see Sharing)
//	centroid_deg              middle of the energy of these 3 ms
//	crest                     peak over effective value of these 3 ms
//	ringdown_ms               time constant of the envelope's decay, from its peak to max(5 % of it, 3 backgrounds)
//	band_low_db               mean square of these 3 ms at 2 to 5 kHz, dB over 1 (m/s²)²; no background removed
//	band_mid_db               at 5 to 10 kHz
//	band_high_db              at 10 to 20 kHz
//
// and of openings (t1.he.suction.opens, t1.he.discharge.opens):
//
//	opening_slope_bar_s       slope of the cylinder pressure in time, line over 7 to 1.5 degrees before the opening (class pressure)
//	impact_norm_ln            impact_ln − 0.45 ln(slope in bar/s): stop impacts follow the slope
//	extra_hits                peaks over 2.5 times the median envelope 0.4 to 1.6 ms before them, from 2 ms to 42 degrees after
//	                          the onset, known events of all throws left out
//	extra_hits_45             their sum over the last 45 turns that could be heard
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
// # Features of a leak path (subject t1.he.suction, t1.he.discharge, t1.ce.…, t1.rings)
//
//	leak_area_mm2             by the leak fit, signed, wall heat in it: compare with the healthy machine
//	leak_percent              gas through that area in a turn over what the path's end (rings: both ends) delivers, by suction
//	leak_noise_db             mean leak-band level where this path would leak most; at least 40 degrees free of events
//	leak_shape                projection of the leak band on this path's nozzle flow
//
// # Features of a valve with a cover sensor (subject: the valve's id)
//
//	cover_c                   cover temperature
//	cover_above_group_k       above the median of the other covers of its kind (suction or discharge) in its stage
//
// Sources: methods.md section 1 (published definitions and magnitudes), leaks.md and vibration.md of the measured advice.
package measure
