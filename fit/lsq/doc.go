// Package lsq fits a model to weighted readings: nonlinear least squares by the
// rule of Levenberg and Marquardt, with or without bounds on the parameters.
//
// It knows nothing of transistors: a Problem gives residuals that are already
// divided by their standard deviations, and their derivatives. A Solver is the
// workspace; kept between problems it takes no memory while it works. Every fit
// names the reason it stopped, and only the reasons of Reason.Converged stand
// for a minimum. It refuses to guess: no derivatives by differences, no second
// start of its own, no number where the Jacobian leaves one open (NaN instead),
// and no panic on data.
//
// # Method
//
// The sum of squares S = Σ r_i² is brought down by steps δ that minimise
//
//	‖r + J δ‖² + μ ‖D δ‖²
//
// within the bounds, D_jj being the greatest norm that column j of J has had, so
// that units do not matter. J is taken apart once per accepted point (J = QR, by
// Householder reflections), and each damping μ costs only a small triangle. The
// normal equations are never formed.
//
// Source: K. Levenberg, Q. Appl. Math. 2 (1944) 164–168; D. W. Marquardt, J. SIAM
// 11 (1963) 431–441; J. J. Moré, "The Levenberg-Marquardt algorithm:
// implementation and theory", Lecture Notes in Mathematics 630 (1978) 105–116
// (from memory). Bounds: the active-set rule of P. B. Stark and R. L. Parker,
// "Bounded-variable least-squares", Computational Statistics 10 (1995) 129–141
// (from memory), without its release step. Angle between residuals and tangent
// plane as the sign of a minimum: D. M. Bates and D. G. Watts, "A relative offset
// orthogonality convergence criterion for nonlinear least squares",
// Technometrics 23 (1981) 179–183 (from memory).
package lsq
