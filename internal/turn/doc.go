// Package turn takes revolutions from time to crank angle: pressures on a uniform angle grid, vibration filtered at
// full rate and binned by angle, shaft speed and angle uncertainty.
//
// It needs: every revolution's frame in order, with the marks of the shaft reference as sample positions.
// It waits: until the second revolution after the one it emits has come, because a throw's turn, padded by 60 degrees
// on both sides, may begin in the frame before and end two frames later.
// It emits: exactly one Turn for every revolution, in order; a frame that spans several gives one for each.
// When it cannot (a pulse or samples missing in that revolution or in those it leans on, no neighbours at the start
// and at the end): a Turn with a Reason and no throws.
//
// Angle. Sample positions of angles come from the not-a-knot cubic spline through all marks of four revolutions, laid
// over the angle, or over φ(θ) = θ − Σ (aₙ/n) sin(nθ − pₙ) when the speed ripple w = mean·(1 + Σ aₙ cos(nθ − pₙ)) is
// given (θ from the mark). Straight lines between marks would cost up to 1° while speed changes.
//
// Pressure. At each grid angle a line is fitted to the samples around it under a Gaussian weight of σ = half a grid
// step, but at least 0.8 samples: anti-aliasing, interpolation and no delay in one. With N = 180/step, the grid's
// Nyquist as a shaft order (360 at 0.5°, 900 at 0.2°, 1800 at 0.1°), an order comes out too small by 0.3 % at 0.05 N,
// 1.2 % at 0.1 N, 7.5 % at 0.25 N, 29 % (-3 dB) at 0.53 N and -10.7 dB at N. Beyond N, what is left folds back: 6 % from
// 1.5 N onto 0.5 N, 1.2 % from 1.9 N onto 0.1 N. A ramp has no bias, a curved stroke σ²p″/2p′, under 0.003° at 0.5°.
// The band in Hz follows the speed: 1.59·rpm/step, 2.2 kHz at 700 rpm and 0.95 kHz at 300 rpm for 0.5°, and never above
// 0.166 of the sampling rate. The weight is not made narrower in time on slow machines: the grid could not carry what
// came through, it would fold. A slow machine takes a finer grid (0.2° at 300 rpm: 2.4 kHz); the skid file's check says
// when. The cost per second stays what it is at twice the speed and twice the step.
// A known gauge passage is undone in the same step (Passage).
//
// Vibration. A causal Butterworth band-pass of order 2 per edge runs through all samples, across turns; nothing is
// decimated before detection. Its delay, the centre of the energy of its answer to an impulse (1.45 samples or 0.028 ms
// for 2 to 20 kHz, 2.5 samples for 10 to 20 kHz, at 51.2 kHz), is taken out to the nearest sample in X, Peak, RMS and
// Leak, and Vib.Late tells the rest. What is left of rings of 3 to 12 kHz is within 0.01 ms (0.04° at 700 rpm, 0.1° at
// 1800 rpm) of where the onset rule finds the unfiltered impact; the rule's own lateness is the rule's. Lost samples
// reset the filters.
package turn
