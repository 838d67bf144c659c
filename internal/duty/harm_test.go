package duty

import (
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"

	"lapwing/internal/measure"
)

// Missing and invalid values of one measure change nothing for the others, whether the run learns or judges; turns
// that are not judged change nothing at all; and nothing that comes out is NaN or infinite.
func TestMissingValuesDoNoHarm(t *testing.T) {
	clean := learnt(t, 21, 100, nil, 0.3, 0)
	rapid.Check(t, func(t *rapid.T) {
		victim := rapid.IntRange(0, 3).Draw(t, "victim")
		often := rapid.Float64Range(0, 1).Draw(t, "share of missing values")
		seed := rapid.Uint64().Draw(t, "seed")
		kinds := []float64{math.NaN(), math.Inf(1), math.Inf(-1)}

		// learning
		p := &plant{r: rand.New(rand.NewPCG(21, 1)), ratio: 2.5, rpm: 750, ps: 20e5, phi: 0.3}
		harm := rand.New(rand.NewPCG(seed, 3))
		l := NewLearner(testLayout, LearnConfig{Steps: []int{1, 2}, Throws: 1})
		for range 100 {
			pt, v := p.next()
			if harm.Float64() < often {
				v.V[victim] = kinds[harm.IntN(len(kinds))]
			}
			l.Add(0, pt, &v)
			v.V = []float64{1e9, 1e9, 1e9, 1e9, 1e9}
			for _, s := range []State{Unknown, Stopped, Starting, Changing, Unloaded, OutOfRange} {
				pt.State = s
				l.Add(0, pt, &v)
			}
		}
		b, err := l.Fit(Header{})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := b.Encode(); err != nil {
			t.Fatalf("what was learnt cannot be written: %v", err)
		}
		for i := range clean.Cells {
			for _, m := range clean.Cells[i].Models {
				if n := b.Cells[i].model(m.Subject, m.Name); testLayout.Find(m.Subject, m.Name) != victim && (n == nil || *n != m) {
					t.Fatalf("learning %s changed by what another measure lacked", m.Name)
				}
			}
		}

		// judging
		ref, err := clean.Reference(testLayout)
		if err != nil {
			t.Fatal(err)
		}
		sound, hurt := NewBlocks(ref, BlockConfig{}), NewBlocks(ref, BlockConfig{})
		for range 45 {
			pt, v := p.next()
			want, closed := sound.Add(0, pt, &v, ref.Deviate(nil, 0, pt, &v))
			w := measure.Vector{Turn: v.Turn, RPM: v.RPM, V: append([]float64(nil), v.V...)}
			if harm.Float64() < often {
				w.V[victim] = kinds[harm.IntN(len(kinds))]
			}
			got, closedToo := hurt.Add(0, pt, &w, ref.Deviate(nil, 0, pt, &w))
			if closed != closedToo {
				t.Fatal("a block closes earlier or later")
			}
			off := pt
			off.State = rapid.SampledFrom([]State{Unknown, Stopped, Starting, Unloaded, OutOfRange}).Draw(t, "state")
			wild := measure.Vector{Turn: v.Turn, V: []float64{1e9, 1e9, 1e9, 1e9, 1e9}}
			if _, ok := hurt.Add(0, off, &wild, ref.Deviate(nil, 0, off, &wild)); ok {
				t.Fatalf("a turn that is %v closed a block", off.State)
			}
			byFeature := map[int]Deviation{}
			for _, d := range got.Dev {
				byFeature[d.Feature] = d
				for _, x := range []float64{d.Value, d.Expected, d.Residual, d.Spread, d.Z, d.Drift} {
					if !known(x) {
						t.Fatalf("%+v", d)
					}
				}
			}
			for _, d := range want.Dev {
				if d.Feature != victim && byFeature[d.Feature] != d {
					t.Fatalf("%+v, without the missing values %+v", byFeature[d.Feature], d)
				}
			}
		}
	})
}
