// Package stats holds the estimators and tests that the numerical library
// lacks: accurate moments, order statistics with a named quantile rule, tests for
// single outliers, the arithmetic of combined uncertainties; tests of normality;
// for two samples t tests, trimmed means, rank tests, spreads, whole distributions,
// equivalence, and how many values each of these needs; for several groups
// analysis of variance, comparisons of all pairs and adjustment for many tests;
// control charts, gauge studies, and slopes against the order of measuring.
//
// It is general: it knows nothing of transistors or lots. It never changes the
// slices it is given, never panics on data, and says NaN where there are too
// few values for a number. It draws no conclusion: a caller who wants to leave
// a value out has to say why.
package stats
