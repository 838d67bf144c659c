package gas

import "testing"

func BenchmarkDuty(b *testing.B) {
	for _, name := range []string{"pipeline-gas", "hydrogen-makeup"} {
		m, err := Named(name)
		if err != nil {
			b.Fatal(err)
		}
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if _, err := m.Duty(2e6, 300, 5e6); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

func BenchmarkNew(b *testing.B) {
	for b.Loop() {
		if _, err := Named("pipeline-gas"); err != nil {
			b.Fatal(err)
		}
	}
}
