// Package chart draws: pressure over crank angle with the vibration and the windows below it, p–V, log p–log V with the
// fitted lines, rod load with its reversal, spectra and trends. One package draws for hand tool, page and report.
//
//	Needs: values taken out of a turn (Cylinder) or of many (Trend); nothing of how they were computed.
//	Waits: not at all.
//	Emits: SVG, PNG or PDF, and where on it the panels lie, so that a script can read a cursor.
//	What is NaN or missing is left out of the picture, and a chart that would be empty is an error that says why.
//
// Ends are told apart by colour and by line: head end blue and solid, crank end vermilion and dashed; a reference is grey
// and dotted. The colours are of the set of Okabe and Ito, "Color universal design" (2008), which people of all kinds of
// colour vision, and a black-and-white printer with the line styles, can tell apart.
package chart
