package kick

import (
	"fmt"
	"math"
)

// Swapped is a part of the drive that a reference part took the place of.
type Swapped string

// The parts whose swap splits a weak drive.
const (
	Cell   Swapped = "cell"
	Magnet Swapped = "magnet"
	CoilIn Swapped = "coil"
)

// Swap says whether a weak unit's fault left it with the part that was swapped. what
// names the number that is weak: the kick, or what two magnets do to each other.
// change is the relative change of its kick from the clip before to the clip after,
// u its standard uncertainty without what both clips have in common. at is the
// probability that the fault was in that part: its swap then raises the kick by
// more than what is tolerated; otherwise the kick stays, but for what it scatters
// from seat to seat.
func Swap(change, u float64, part Swapped, what string) (verdict string, at float64) {
	s := math.Hypot(u, UsualScatter)
	its := tail(change-tolerated, s, wide)
	other := math.Exp(-change*change/2/s/s) / s / math.Sqrt(2*math.Pi)
	switch {
	case its+other > 0:
		at = its / (its + other)
	case change > 0:
		at = 1
	}
	said := fmt.Sprintf("with a reference %s the %s is %s of what it was", part, what, percent(1+change, u))
	switch {
	case at >= certain:
		return fmt.Sprintf("The fault was in the %s: %s (probability %s).", part, said, chance(at)), at
	case at <= 1-certain && what != "kick":
		return fmt.Sprintf("The fault was not in that %s: %s (probability %s). Put a reference magnet in the place of the other next.", part, said, chance(1-at)), at
	case at <= 1-certain:
		next := map[Swapped]string{
			Cell: "Put in a reference magnet next.", Magnet: "Put in a reference cell next, if that was not done; else it is the coil.",
			CoilIn: "Put in a reference cell next, then a reference magnet.",
		}[part]
		return fmt.Sprintf("The fault was not in the %s: %s (probability %s). %s", part, said, chance(1-at), next), at
	}
	if what != "kick" {
		return fmt.Sprintf("These clips cannot tell whether it was that %s: %s. Film both again, longer or from nearer.", part, said), at
	}
	return fmt.Sprintf("These clips cannot tell whether it was the %s: %s. Film both again, with ten seconds without the battery.", part, said), at
}
