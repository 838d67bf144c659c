package gas

import (
	"math"
	"path/filepath"
	"testing"
)

// Worked example 7: speed of sound of a gas passage between cylinder and transmitter, and with it the quarter-wave
// frequency f = (2n − 1) c/(4 (L + 0.6 r)) of a passage that is closed at the sensor.
func TestWorkedPassageResonance(t *testing.T) {
	ex := readShared(t, filepath.Join("..", "worked", "ex7_channel_resonance.csv"))
	grid := map[string]string{"methane": "check_methane.csv", "lean_gulfcoast": "check_lean_gulfcoast.csv",
		"h2_makeup": "check_h2_makeup.csv", "co2": "check_co2.csv", "nitrogen": "check_nitrogen.csv", "rich_c2c6": "check_rich_c2c6.csv"}
	gases := map[string]*Mixture{}
	for _, row := range ex.rows {
		name := row["gas"]
		if gases[name] == nil {
			for _, m := range readShared(t, grid[name]).gases {
				gases[name] = m
			}
		}
		st, err := gases[name].At(num(t, row, "T_K"), num(t, row, "P_kPa")*1e3)
		if err != nil {
			t.Fatal(name, err)
		}
		near(t, name+" speed of sound", st.W, num(t, row, "c_m_per_s"), 1e-7)
		l := (num(t, row, "L_mm") + 0.3*num(t, row, "bore_mm")) / 1e3
		near(t, name+" first resonance", st.W/(4*l), num(t, row, "f1_corr0.6r_Hz"), 1e-5)
		near(t, name+" second resonance", 3*st.W/(4*l), num(t, row, "f2_corr_Hz"), 1e-5)
	}
	t.Logf("%d passages", len(ex.rows))
}

// Worked example 9, the trade's closed formulas: discharge temperature T2 = Ts r^((k−1)/k), delivered volume by 96 − r −
// C[(Zs/Zd) r^(1/k) − 1] (from whose 100 − … this package's exponents leave the losses 4 + r out), and horsepower by
// 3.03 Zavg (Q Ts/E)(k/(k−1))(PL/TL)[r^((k−1)/k) − 1].
func TestWorkedFormulas(t *testing.T) {
	for _, k := range []struct{ ts, k, want float64 }{{559.67 / 1.8, 1.28, 379.93465}, {303.15, 1.2, 353.167643}, {303.15, 1.25, 364.120872},
		{303.15, 1.3, 374.532821}, {303.15, 1.4, 393.871646}} {
		p, err := Fixed{M: .018, Zs: 1, Zd: 1, KV: 1.3, KT: k.k}.Duty(1e6, k.ts, 2.5e6)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "discharge temperature", p.T2s, k.want, 1e-7)
	}
	for _, k := range []struct{ zs, zd, want float64 }{{1, 1, 74.673272}, {.96, .97, 75.052929}} {
		p, err := Fixed{M: .018, Zs: k.zs, Zd: k.zd, KV: 1.28, KT: 1.28}.Duty(1e6, 300, 2.5e6)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "volumetric efficiency", 96-2.5-18*(p.Zs/p.Zd*math.Pow(2.5, 1/p.KV)-1), k.want, 1e-7)
	}
	// 10.813403 MMscfd at 14.7 psia and 519.67 °R into 619.33403 hp: the same power in SI from R, with the standard volume
	// turned into moles. The formula's constant 3.03 is rounded: 0.085710 against 0.085719, one part in 10⁴.
	const psi, foot3, hp = 6894.757293, 0.028316846592, 745.69987
	flow := 10.813403e6 * foot3 * 14.7 * psi / (gasConstant * 519.67 / 1.8) / 86400 // mol/s
	p, err := Fixed{M: .018, Zs: .965, Zd: .965, KV: 1.28, KT: 1.28}.Duty(1e6, 559.67/1.8, 2.5e6)
	if err != nil {
		t.Fatal(err)
	}
	head := p.Zs * p.R * 559.67 / 1.8 * p.KV / (p.KV - 1) * (math.Pow(2.5, (p.KV-1)/p.KV) - 1) // J/kg
	near(t, "power", flow*p.M*head/.82/hp, 619.33403, 2e-4)
}
