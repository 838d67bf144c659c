// Package skid reads the skid file, the one description of a machine that everything else works from.
//
//	Needs: the bytes of a YAML file.
//	Waits: for nothing; a file is read whole and at once.
//	Emits: a validated *Skid in SI units, or every problem of the file at once, each with line, column and what to
//	write instead. It gives no half-understood machine: one problem and there is no Skid.
//
// People's units stand in the key (bore_mm, p_suction_bar_abs, mv_per_g); a key with another unit is refused with
// the key to use and, where it can be worked out, the number. Pressures say whether they are absolute or gauge.
// Anchors, aliases and tags are refused, so that a value always stands where its message points.
//
// A value that is possible but odd is no problem; Doubts lists those, and Report says what the machine was
// understood to be.
package skid
