package measure

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
	const (
		stands = "impact 6 dB above the background, alone in its window"
		bands  = "as impact_ln, background in it"
	)
	return [eventCount]def{
		vPeak: {name: "peak_g", unit: "g", class: Vibration, scale: gee, what: "largest acceleration in the window",
			how: "of both events where the window is shared", source: srcVib, valid: "window known", unc: "turn 15 to 28 %"},
		vRMS: {name: "rms_g", unit: "g", class: Vibration, scale: gee, what: "effective acceleration in the window",
			how: "of both events where the window is shared", source: srcVib, valid: "window known", unc: "turn 10 to 19 %"},
		vOnset: {name: "onset_deg", unit: "°", class: Vibration, scale: one, what: "angle at which the impact begins",
			how: "first envelope over max(0.35 peak, 4 backgrounds)", source: srcVib, valid: "no other event may be meant", unc: "turn 0.02 to 0.07°, and U"},
		vLag: {name: "lag_ms", unit: "ms", class: Vibration, scale: 1e3, what: "impact after the pressure's event",
			source: "windows.md 2", valid: "both found", unc: "turn 0.03 to 0.13° as time"},
		vImpact: {name: "impact_ln", unit: "ln m/s²", class: Vibration, scale: one, what: "ln of the effective acceleration in m/s² over 3 ms from the onset, background removed",
			how: "ln √(mean square − background²); events that ring into each other by templates, where these differ enough", source: srcVib,
			valid: "6 dB above the background; alone, separated or the stronger of two", unc: "turn 0.10 to 0.17; unmixed 0.05 to 0.23"},
		vCentroid: {name: "centroid_deg", unit: "°", class: Vibration, scale: one, what: "middle of the impact's energy",
			how: "over the same 3 ms", source: srcVib, valid: stands, unc: "turn 0.1 to 0.75°", eye: true},
		vCrest: {name: "crest", unit: "1", class: Vibration, scale: one, what: "peak over effective acceleration of the impact",
			how: "over the same 3 ms", source: srcVib, valid: stands, unc: "follows the length of the window", eye: true},
		vRing: {name: "ringdown_ms", unit: "ms", class: Vibration, scale: 1e3, what: "time constant of the impact's decay",
			how: "envelope from its peak to max(5 % of it, 3 backgrounds)", source: srcVib, valid: stands, unc: "turn 8 to 60 %", eye: true},
		vBandLow: {name: "band_low_db", unit: "dB", class: Vibration, scale: one, what: "impact at 2 to 5 kHz, dB over 1 (m/s²)²",
			how: "mean square over the same 3 ms", source: srcVib, valid: stands, unc: bands, eye: true},
		vBandMid: {name: "band_mid_db", unit: "dB", class: Vibration, scale: one, what: "impact at 5 to 10 kHz, dB over 1 (m/s²)²",
			how: "likewise", source: srcVib, valid: stands, unc: bands, eye: true},
		vBandHigh: {name: "band_high_db", unit: "dB", class: Vibration, scale: one, what: "impact at 10 to 20 kHz, dB over 1 (m/s²)²",
			how: "likewise", source: srcVib, valid: stands, unc: bands, eye: true},
		vSlope: {name: "opening_slope_bar_s", unit: "bar/s", class: Pressure, scale: bar, what: "slope of the cylinder pressure ahead of the opening",
			how: "line over 7 to 1.5° before it, in time; openings only", source: srcVib, valid: "opening found", unc: "1 %", eye: true},
		vNorm: {name: "impact_norm_ln", unit: "ln", class: Vibration, scale: one, what: "impact_ln less what the pressure slope at opening gives it",
			how: "impact_ln − 0.45 ln(slope in bar/s); openings only", source: srcVib, valid: "as impact_ln, slope known", unc: "15-turn medians within 0.25 under load swings", flat: true},
		vHits: {name: "extra_hits", unit: "1", class: Vibration, scale: one, what: "hits after the opening",
			how:    "peaks over 2.5 times the median envelope 0.4 to 1.6 ms before them, from 2 ms to 42° after the onset, known events of all throws left out; openings only",
			source: "vibration.md 4", valid: "onset found", unc: "counting", eye: true},
		vHits45: {name: "extra_hits_45", unit: "1", class: Vibration, scale: one, what: "hits after the opening in the last 45 turns that could be heard",
			how: "their sum; openings only", source: "vibration.md 4", valid: "heard in enough turns", unc: "√ of the count", flat: true},
	}
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
	const area = "see Leak areas, measured; wall heat is in it: compare with the healthy machine"
	return [pathCount]def{
		lArea: {name: "leak_area_mm2", unit: "mm²", class: Pressure, scale: mm2, what: "effective leak area by the leak fit, signed",
			source: srcLeaks, valid: "leak fit", unc: area},
		lPercent: {name: "leak_percent", unit: "%", class: Pressure, scale: percent, what: "gas through that area in a turn, per cent of the path's throughput, signed",
			how: "over what the path's end (rings: both ends) takes in, by suction", source: srcLeaks, valid: "leak fit, throughput known", unc: area},
		lNoise: {name: "leak_noise_db", unit: "dB", class: Vibration, scale: one, what: "leak-band level where this path would leak most, dB over 1 (m/s²)²",
			how:    "10 ⟨w lg y⟩/⟨w⟩, y mean square at 10 to 20 kHz on the degrees free of events, w = max(0, S − ⟨S⟩), S the path's nozzle flow",
			source: "vibration.md 3", valid: "accelerometer; 40° free of events", unc: "turn 0.2 to 0.4 dB at constant duty"},
		lShape: {name: "leak_shape", unit: "1", class: Vibration, scale: one, what: "projection of the leak-band noise on the path's own leak flow",
			how: "⟨(S − ⟨S⟩) y⟩/(σ(S)⟨y⟩)", source: "vibration.md 3", valid: "as leak_noise_db", unc: "names the pair, not its member"},
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
		cCover: {name: "cover_c", unit: "°C", class: Temperature, scale: one, shift: zeroC, what: "cover temperature", source: "process value",
			valid: "value known", unc: "thermometer; lags by a minute or more"},
		cAbove: {name: "cover_above_group_k", unit: "K", class: Temperature, scale: one, what: "cover temperature above the middle of the other valves of its kind",
			how: "suction or discharge valves of the same stage", source: "methods.md 1.2", valid: "another of its kind known", unc: "differences of place: learn them"},
	}
}
