package match

import "lodeswing/track/rig"

// Filmed is the rig as one clip had it: without what its entry says was taken out,
// with magnets where they were moved to, without coils where the battery was out.
// Without an entry it is a copy of the rig.
func Filmed(r *rig.Rig, entry *rig.Clip) (*rig.Rig, error) {
	c, err := variant(r, entry)
	if err != nil {
		return nil, err
	}
	if entry != nil && !entry.Battery {
		c.Coils = nil
	}
	return c, nil
}
