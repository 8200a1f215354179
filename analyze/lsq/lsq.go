// Package lsq is nonlinear least squares for the fits of this project. What
// comes in: a Problem (a residual function, what is held, what is bounded) and
// Options (how far to go, how to treat outliers). What goes out: a Summary that
// explains itself: the parameters with their covariance, why the search
// stopped, what was held, what ended on a bound, and which combinations of
// parameters the data could not separate. Units are the caller's; the package
// has none of its own. It imports nothing of ours.
//
// The method is a damped Gauss–Newton search in a scaled trust region
// (J. J. Moré, "The Levenberg–Marquardt algorithm: implementation and theory",
// Lecture Notes in Mathematics 630, 1978). The Jacobian is factored by
// Householder QR and the small triangle by one-sided Jacobi SVD, so the normal
// equations are never formed. Bounds are kept by an active set with a
// projected-gradient safeguard.
package lsq

// Problem says what is to be fitted: find p of length N that makes the M
// residuals small, Σ rᵢ(p)² or Σ ρ(rᵢ²) with a robust loss.
type Problem struct {
	N int // parameters, held ones included
	M int // residuals

	// Residuals fills r (length M) at p (length N), which it must not keep or
	// change. A residual that is NaN or infinite, or an error, marks p as a place
	// where the model does not exist: the step is rejected and a shorter one
	// tried. At the start it is an error.
	Residuals func(p, r []float64) error

	// Jacobian fills j, M rows of N columns in row-major order, with ∂rᵢ/∂pⱼ.
	// Columns of held parameters may be left alone. Nil: differences.
	Jacobian func(p, j []float64) error

	Names  []string  // for messages; nil: p1, p2, …
	Lo, Hi []float64 // bounds, nil or length N; use ±Inf where there is none
	// Scale is the size of a typical change of each parameter, nil or length N;
	// 0 stands for |start|, or 1 where that is 0 too. It sets the least step of
	// the differences and the words in which combinations are told.
	Scale []float64
	Hold  []bool // true: stays at its start; nil: all are free
	// Prior holds what is known beforehand, for instance a length measured with
	// a ruler. Each adds the residual (p − Value)/U. It needs
	// Options.SigmaKnown, since otherwise the data's weight is unknown.
	Prior []Prior

	least []float64 // size that a parameter is taken to have at least in differences
}

// Prior is a parameter that is known beforehand with a standard uncertainty U.
type Prior struct {
	Parameter int
	Value, U  float64
}

// Options says how to search. The zero value is a good choice.
type Options struct {
	MaxIterations int // 0: 500
	// TolF stops the search when a step is foreseen to lower, and does lower, the
	// sum of squares by less than this fraction. 0: 1e-16, which leaves
	// parameters within about 1e-7 of their standard uncertainty; 1e-10 is enough
	// for most uses and saves the last few evaluations.
	TolF float64
	// TolP stops it when a step is shorter than this fraction of the parameters,
	// in the scaled norm. 0: 1e-12.
	TolP float64
	// TolG stops it when the cosine of the angle between the residuals and every
	// column of the Jacobian is below it. 0: 1e-14.
	TolG float64
	// Radius is the first trust region over the scaled length of the start. 0: 1.
	Radius float64
	// Once: do not try again with other dampings when the search does not converge or
	// a parameter loses its effect on the way.
	Once bool
	// DiffStep is the relative step of the differences. 0: 6e-6, the cube root of
	// the machine precision; larger for residuals that carry a numerical noise
	// of their own, such as those of an integrator with a loose tolerance.
	DiffStep float64
	// Workers > 1 spreads the differences over so many goroutines; Residuals must
	// then allow concurrent calls.
	Workers int
	// SigmaKnown: residuals are already divided by their standard uncertainty.
	// Otherwise the covariance is scaled by χ² over the degrees of freedom.
	SigmaKnown bool
	// Loss tames outliers; the zero value is plain squares.
	Loss Loss
	// RankTol is the least singular value, relative to the largest, of the
	// Jacobian with columns of unit length that still counts. 0: 1e-7 with
	// differences, 1e-11 with a Jacobian.
	RankTol float64
}

// Summary is what a search found. Slices over parameters have length N.
type Summary struct {
	Names []string
	P     []float64 // the parameters
	// U is the standard uncertainty: 0 for held parameters, +Inf for those that
	// the data could not separate from others.
	U []float64
	// Cov is the N×N covariance, row-major. Rows and columns of held parameters
	// are 0. Along directions that could not be separated it holds nothing
	// (pseudo-inverse), so the variance of a combination that is determined may be
	// taken from it: see Of. Bounds are taken as not there.
	Cov       []float64
	Residuals []float64 // length M, at P, as the Problem gave them
	Weights   []float64 // length M: what the robust loss left of each residual's weight, 1 … 0; nil for plain squares
	Jacobian  []float64 // M×N row-major at P; columns of held parameters are 0
	ChiSquare float64   // Σ r² over residuals and priors
	Cost      float64   // what was minimised: Σ ρ; equals ChiSquare for plain squares
	DoF       int       // residuals + priors − rank
	Rank      int       // of the free parameters
	Scatter   float64   // the residuals' standard deviation that scaled Cov; 1 with SigmaKnown and plain squares
	LossScale float64   // the residual that counts as one σ in the robust loss; 0 for plain squares
	Held      []bool
	AtBound   []int // free parameters that ended on a bound
	// Inseparable holds the combinations that the data do not determine at all,
	// Weak those that they determine badly although the rank is full.
	Inseparable []Combination
	Weak        []Combination
	// Singular holds the singular values of the Jacobian with columns of unit
	// length, largest first.
	Singular    []float64
	Converged   bool
	Reason      string // why it stopped, plain words
	Iterations  int
	Evaluations int // of Residuals, those for differences included
	prior       []Prior
	unscale     float64 // Cov over (JᵀWJ)⁻¹
}

// Combination is a direction in the space of parameters along which the data
// say nothing, or little.
type Combination struct {
	// Parameters are those that take part, largest share first, and Change how
	// much each moves along the direction, in units of its Scale (or of |P|),
	// largest = 1.
	Parameters []int
	Change     []float64
	// Singular is the direction's singular value relative to the largest.
	Singular float64
	// Kept is, for two parameters, the exponents (a, b) of the product
	// |p1|^a·|p2|^b that does stay determined, and UKept the relative standard
	// uncertainty of that product; nil otherwise.
	Kept  []float64
	UKept float64
	Text  string // plain words
}
