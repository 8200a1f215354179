// Package link says who is who over time. What comes in: where each bob was so
// far, and what is seen in the next frame. What goes out: where each bob is
// expected, with its uncertainty, and which sighting belongs to which bob.
// Units: seconds, px of the upright picture, px², px/s, px/s².
package link

import "math"

// Assign pairs rows with columns so that the sum of costs is least; each row
// gets at most one column and the reverse. A row stays alone (−1) where that
// costs less, at alone per row. Costs that are +Inf or NaN are pairs that must
// not be. cost may have any shape with rows of equal length, or none.
//
// Method: shortest augmenting paths with dual potentials, R. Jonker & A.
// Volgenant, Computing 38 (1987) 325–340. Each row also has a private column of
// cost alone, so that a full assignment always exists.
func Assign(cost [][]float64, alone float64) []int {
	rows := len(cost)
	if rows == 0 {
		return nil
	}
	real := len(cost[0])
	cols := real + rows
	at := func(i, j int) float64 {
		if j < real {
			if c := cost[i][j]; !math.IsNaN(c) {
				return c
			}
			return math.Inf(1)
		}
		if j == real+i {
			return alone
		}
		return math.Inf(1)
	}
	rowPot, colPot := make([]float64, rows), make([]float64, cols)
	rowOf := make([]int, cols) // which row has the column
	for j := range rowOf {
		rowOf[j] = -1
	}
	dist, from, done := make([]float64, cols), make([]int, cols), make([]bool, cols)
	for start := range rows {
		for j := range cols {
			dist[j], from[j], done[j] = math.Inf(1), -1, false
		}
		i, end := start, -1
		var reached float64
		last := -1 // column through which row i was entered
		for end < 0 {
			best, bestJ := math.Inf(1), -1
			for j := range cols {
				if done[j] {
					continue
				}
				if d := reached + at(i, j) - rowPot[i] - colPot[j]; d < dist[j] {
					dist[j], from[j] = d, last
				}
				if dist[j] < best {
					best, bestJ = dist[j], j
				}
			}
			// The private column of start is always reachable.
			reached, last = best, bestJ
			done[bestJ] = true
			if rowOf[bestJ] < 0 {
				end = bestJ
			} else {
				i = rowOf[bestJ]
			}
		}
		for j := range cols {
			if done[j] && j != end {
				rowPot[rowOf[j]] += reached - dist[j]
				colPot[j] -= reached - dist[j]
			}
		}
		rowPot[start] += reached
		for j := end; j >= 0; {
			prev := from[j]
			if prev >= 0 {
				rowOf[j] = rowOf[prev]
			} else {
				rowOf[j] = start
			}
			j = prev
		}
	}
	out := make([]int, rows)
	for i := range out {
		out[i] = -1
	}
	for j, i := range rowOf {
		if i >= 0 && j < real {
			out[i] = j
		}
	}
	return out
}
