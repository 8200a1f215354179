// Package magnet computes what permanent magnets do to each other. What comes
// in: dipole moments in A·m², axially magnetised cylinders in metres and tesla.
// What goes out: energies in J, forces in N, torques in N·m, flux densities in
// T. Forces and torques are exact gradients of the energies. It imports nothing
// of ours.
package magnet
