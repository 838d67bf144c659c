// Package verdict turns deviations into findings: which valve group, what kind, how sure, on which evidence.
//
// Needs: duty.Blocks of one machine against its baseline, and the measure.Layout they are aligned to.
// Waits: three blocks before anything is raised, six contrary blocks before a finding fades.
// Emits: per block the findings of that throw, with those that have just ended (grade None).
//
// When a block lacks an end's pressures (idle, lost, duty not seen) that end's valves are not judged: their findings
// stand as they were. Missing evidence counts nothing, for or against.
//
// The evidence model is that of reference/vibration.md section 6: signed log-likelihood ratios with heavy tails, capped
// per class of signal, the median of blocks over time, never a sum. One class gives an advisory at most; an alert needs
// two. Pressure speaks through a contrast of whole patterns (reference/methods.md tables 1.3, 3.3 and 3.4): the pattern
// that explains most takes the evidence and the others must live on what is left, so that one leak does not cry on four
// groups, and a wrong dead centre or pressure zero is not called a leak.
//
// A finding says which part, what is wrong with it, how sure that is, how large (mm², % of throughput, kW, ms, K) and
// whether it grows, what it cannot be told from, what would settle it and what people usually do next. Explain tells of
// every hypothesis of the newest block, raised or not: each deviation with its weight before and after caps and rules,
// and what the next grade would take. No leak is called, by patterns or by noise, where the fit to the closed strokes
// can see its path and finds nothing there.
package verdict
