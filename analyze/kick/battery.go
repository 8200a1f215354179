package kick

import (
	"context"
	"errors"

	"lodeswing/analyze/toy"
	"lodeswing/track/rig"
)

// charge makes the function that reckons what one kick draws from the battery: by
// the toy's own model of the coil, from the rig's winding and supply. nil where
// the rig does not give them.
func charge(r *rig.Rig, part string) func(amplitude float64) (float64, error) {
	wound := false
	for i := range r.Coils {
		k := &r.Coils[i]
		wound = wound || (k.Part == part || k.Part == "") && k.Turns.Set && k.RadiusM.Set && k.Ohm.Set && k.SupplyV.Set && !k.KickJ.Set && !k.KickJ.Fit
	}
	if !wound {
		return nil
	}
	return func(amplitude float64) (float64, error) {
		m, err := toy.New(r)
		if err != nil {
			return 0, err
		}
		p, err := m.Part(part)
		if err != nil {
			return 0, err
		}
		y := m.Rest()
		m.SetAngle(y, p, amplitude, 0)
		const seconds, want = 10, 2 // the first pass may find the coil unarmed
		o, err := m.Simulate(context.Background(), y, seconds, toy.Options{Tol: 1e-8})
		if err != nil {
			return 0, err
		}
		n := 0
		for _, e := range o.Events {
			if e.Kind == toy.Kick {
				if n++; n == want {
					return e.Charge, nil
				}
			}
		}
		return 0, errors.New("by the rig's winding the coil does not fire at this amplitude")
	}
}
