package gas

import "math"

// blend is the equation of state of one fixed composition.
type blend struct {
	co     *coefficients
	x      [nComponents]float64
	m      float64 // kg/mol
	tr, vr float64 // reducing temperature, K, and reducing molar volume, m³/mol
	groups []group
}

// group is a sum of terms with a common weight in α^r: x_i for a pure substance (j = −1), x_i x_j F_ij for a pair.
type group struct {
	i, j   int
	weight float64
	terms  []term
}

func newBlend(co *coefficients, x [nComponents]float64) *blend {
	b := &blend{co: co, x: x}
	for i := range x {
		if x[i] == 0 {
			continue
		}
		b.m += x[i] * co.comp[i].m
		b.groups = append(b.groups, group{i, -1, x[i], co.comp[i].pure})
	}
	for i := range x {
		for j := i + 1; j < nComponents; j++ {
			if p := &co.pair[i][j]; x[i] != 0 && x[j] != 0 && p.departure != nil {
				b.groups = append(b.groups, group{i, j, x[i] * x[j] * p.f, p.departure})
			}
		}
	}
	b.vr, b.tr, _, _ = b.reducing(false)
	return b
}

// reducing gives the reducing volume and temperature and, when wanted, their derivatives by each mole fraction
// (all fractions taken as independent):
// Y = Σ x_i² Y_i + Σ_{i<j} 2 x_i x_j β γ (x_i + x_j)/(β² x_i + x_j) Y_ij,
// with Y_ij = (v_i^⅓ + v_j^⅓)³/8 for the volume and √(T_i T_j) for the temperature.
func (b *blend) reducing(derivatives bool) (vr, tr float64, dv, dt [nComponents]float64) {
	for i, xi := range b.x {
		ki := &b.co.comp[i]
		vi, ti := 1/ki.rhoc, ki.tc
		vr += xi * xi * vi
		tr += xi * xi * ti
		dv[i] += 2 * xi * vi
		dt[i] += 2 * xi * ti
		for j := i + 1; j < nComponents; j++ {
			xj := b.x[j]
			if xi+xj == 0 || (!derivatives && (xi == 0 || xj == 0)) {
				continue
			}
			p, kj := &b.co.pair[i][j], &b.co.comp[j]
			cube := math.Cbrt(vi) + math.Cbrt(1/kj.rhoc)
			f, fi, fj := cross(xi, xj, p.betaV)
			y := 2 * p.betaV * p.gammaV * cube * cube * cube / 8
			vr += y * f
			dv[i] += y * fi
			dv[j] += y * fj
			f, fi, fj = cross(xi, xj, p.betaT)
			y = 2 * p.betaT * p.gammaT * math.Sqrt(ti*kj.tc)
			tr += y * f
			dt[i] += y * fi
			dt[j] += y * fj
		}
	}
	return vr, tr, dv, dt
}

// cross is x y (x+y)/(β²x + y) and its two derivatives.
func cross(x, y, beta float64) (f, fx, fy float64) {
	b := beta * beta
	den := b*x + y
	f = x * y * (x + y) / den
	fx = y*(2*x+y)/den - f*b/den
	fy = x*(x+2*y)/den - f/den
	return f, fx, fy
}

// isotherm is a blend at one temperature, with the powers of τ done once.
type isotherm struct {
	*blend
	t, tau float64
	coef   []float64 // n τᵗ of every term, group after group
}

func (b *blend) at(t float64) *isotherm {
	s := &isotherm{blend: b, t: t, tau: b.tr / t}
	n := 0
	for i := range b.groups {
		n += len(b.groups[i].terms)
	}
	s.coef = make([]float64, 0, n)
	lnTau := math.Log(s.tau)
	for _, g := range b.groups {
		for _, k := range g.terms {
			s.coef = append(s.coef, k.n*math.Exp(k.t*lnTau))
		}
	}
	return s
}

// residual holds α^r and its derivatives, each multiplied by the powers of δ and τ it belongs to.
type residual struct {
	a, d, dd, t, tt, dt float64
}

func (r *residual) add(w float64, s residual) {
	r.a += w * s.a
	r.d += w * s.d
	r.dd += w * s.dd
	r.t += w * s.t
	r.tt += w * s.tt
	r.dt += w * s.dt
}

// residual gives α^r at a molar density (mol/m³). each, when not nil, receives every group's own unweighted sum.
func (s *isotherm) residual(density float64, each func(g *group, r residual)) residual {
	delta := density * s.vr
	var total residual
	var powers [9]float64 // δ⁰…δ⁸
	powers[0] = 1
	for i := 1; i < len(powers); i++ {
		powers[i] = powers[i-1] * delta
	}
	var decay [9]float64 // exp(−δᶜ), made when first wanted
	k := 0
	for gi := range s.groups {
		g := &s.groups[gi]
		var r residual
		for i := range g.terms {
			t := &g.terms[i]
			v := s.coef[k] * powers[t.d]
			k++
			d := float64(t.d)
			e, minus := d, d // δ ∂ln/∂δ, and what (e² − minus) needs for the second derivative
			switch {
			case t.gauss:
				off := delta - t.eps
				v *= math.Exp(-t.eta*off*off - t.beta*(delta-t.gamma))
				e = d - 2*t.eta*delta*off - t.beta*delta
				minus = d + 2*t.eta*delta*delta
			case t.c > 0:
				if decay[t.c] == 0 {
					decay[t.c] = math.Exp(-powers[t.c])
				}
				v *= decay[t.c]
				c := float64(t.c)
				e = d - c*powers[t.c]
				minus = e + c*c*powers[t.c]
			}
			r.a += v
			r.d += v * e
			r.dd += v * (e*e - minus)
			r.t += v * t.t
			r.tt += v * t.t * (t.t - 1)
			r.dt += v * e * t.t
		}
		if each != nil {
			each(g, r)
		}
		total.add(g.weight, r)
	}
	return total
}

// pressure gives p (Pa) and ∂p/∂D (Pa m³/mol) at a molar density.
func (s *isotherm) pressure(density float64) (p, slope float64) {
	r := s.residual(density, nil)
	rt := gasConstant * s.t
	return density * rt * (1 + r.d), rt * (1 + 2*r.d + r.dd)
}
