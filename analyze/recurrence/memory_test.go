package recurrence

import (
	"runtime"
	"testing"
)

// Memory goes with the number of states, not with its square: all that is taken for
// 20,000 states, freed or not, is far below a bit for each pair twice over, and with
// -long (two minutes) the same of 200,000, whose plot would take 40 GB in bytes. Seen:
// 34 MB and 167 MB.
func TestMemoryIsBounded(t *testing.T) {
	sizes := map[int]uint64{20000: 60e6}
	if *long {
		sizes[200000] = 400e6
	}
	for n, most := range sizes {
		v := lorenzStates(t, n)
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		p, err := Auto(v, Options{Rate: 0.02, Map: 400})
		if err != nil {
			t.Fatal(err)
		}
		runtime.ReadMemStats(&after)
		taken := after.TotalAlloc - before.TotalAlloc
		t.Logf("%d states: %.0f MB taken in all, recurrence rate %.4f ± %.4f", n, float64(taken)/1e6, p.Measures.RR.V, p.Measures.RR.U)
		if taken > most {
			t.Errorf("%d states: %.0f MB", n, float64(taken)/1e6)
		}
	}
}
