package model

import "math"

// nearEqual is the share of pressure difference below which the nozzle flow goes from the square-root law to the
// linear one, as in the leak-path equation of the design: ψ is multiplied by √(d/(d+nearEqual)), d = 1 − r.
const nearEqual = 0.002

// nozzle is the isentropic nozzle function ψ of d = 1 − p_down/p_up, choked beyond its limit, as a table.
// ṁ = A·p_up/√(R·T_up)·ψ.
type nozzle struct {
	k     float64   // exponent
	choke float64   // d at which the throat chokes
	scale float64   // table points per unit of d
	g     []float64 // ψ0/√d, smooth down to d = 0
	full  float64   // ψ when choked
}

const nozzlePoints = 1024

func newNozzle(k float64) *nozzle {
	n := &nozzle{k: k, choke: 1 - math.Pow(2/(k+1), k/(k-1))}
	n.scale = nozzlePoints / n.choke
	n.g = make([]float64, nozzlePoints+2)
	for i := range n.g {
		d := min(float64(i)/n.scale, n.choke)
		n.g[i] = math.Sqrt2
		if i > 0 {
			r := 1 - d
			n.g[i] = math.Sqrt(2 * k / (k - 1) * (math.Pow(r, 2/k) - math.Pow(r, (k+1)/k)) / d)
		}
	}
	// Near d = 0 the difference of two powers loses digits; the first points follow from the series.
	n.g[1] = 0.5 * (n.g[0] + n.g[2])
	n.full = n.g[nozzlePoints] * n.choke / math.Sqrt(n.choke+nearEqual)
	return n
}

// at gives ψ and dψ/dd for d >= 0.
func (n *nozzle) at(d float64) (psi, slope float64) {
	if d >= n.choke {
		return n.full, 0
	}
	x := d * n.scale
	i := int(x)
	dg := n.g[i+1] - n.g[i]
	g := n.g[i] + (x-float64(i))*dg
	s := math.Sqrt(d + nearEqual)
	q := 1 / s
	return g * d * q, dg*n.scale*d*q + g*(q-0.5*d*q*q*q)
}

// flow is the mass flow into the cylinder per unit area through a path to a space at pl, from the state of the
// cylinder (p; rt = √(R·T)) and of that space (rtl likewise), and its derivative to p.
func (n *nozzle) flow(p, rt, pl, rtl float64) (in, slope float64) {
	if p >= pl {
		d := 1 - pl/p
		psi, ds := n.at(d)
		return -p / rt * psi, -(psi + ds*(1-d)) / rt
	}
	psi, ds := n.at(1 - p/pl)
	return pl / rtl * psi, -ds / rtl
}

// between is flow with the reciprocals of all four given: a path is looked at so often that divisions count.
func (n *nozzle) between(p, perP, perRT, pl, perPl, perRTl float64) (in, slope float64) {
	if p >= pl {
		d := 1 - pl*perP
		psi, ds := n.at(d)
		return -p * perRT * psi, -(psi + ds*(1-d)) * perRT
	}
	psi, ds := n.at(1 - p*perPl)
	return pl * perRTl * psi, -ds * perRTl
}
