package analyze

import "lodeswing/track/rig"

// Safety is the usual cautions about what the rig says the toy is made of, for
// records that no track or table led to.
func Safety(r *rig.Rig) []string { return safety(r) }
