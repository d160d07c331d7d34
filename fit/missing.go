package fit

import "slices"

// noValueCodes are the warnings that say of a curve why it has no value of some kind:
// one of them is reason enough where that value is missing.
var (
	noCrossingCodes = []string{CodeAboveRange, CodeBelowSweep, CodeBenchLimited, CodeFewPoints}
	noLineCodes     = []string{CodeNoCircuit, CodeFewPoints, CodeSubThresholdOnly, CodeNotSaturated, CodeNotLinear, CodeModelMisfit, CodeBenchLimited, CodeMethodNotValid, CodeSpotOnly}
	noSlopeCodes    = []string{CodeFewPoints, CodeSpotOnly}
)

// Missing says of every quantity that a measured result has no value of why that is:
// nothing where a warning of the result is reason enough, else a warning of its own.
// test and idle tell whether those currents were asked for. It is for programs, which
// find a null and want its reason; people see that a quantity was not asked for.
//
// A result in another state has its reason in the state. Checked: TestEveryNullHasItsCode.
func (r *Result) Missing(test, idle bool) []Warning {
	if r.State != Measured {
		return nil
	}
	var out []Warning
	for _, k := range Keys {
		if r.At(k).Ok() {
			continue
		}
		if w, codes := r.whyMissing(k, test, idle); !slices.ContainsFunc(codes, r.Has) {
			w.Text = "No " + keyWords[k] + ": " + w.Text
			if at := slices.IndexFunc(out, func(o Warning) bool { return o == w }); at < 0 {
				out = append(out, w)
			}
		}
	}
	return out
}

// whyMissing is the warning for a quantity without a value, and the codes that make
// it needless.
func (r *Result) whyMissing(k Key, test, idle bool) (w Warning, codes []string) {
	switch k {
	case KeyVgsth:
		if !test {
			return Warning{CodeNotAsked, "no test current was asked for."}, nil
		}
		return Warning{CodeFewPoints, "the points do not allow it."}, noCrossingCodes
	case KeyVgsIdle, KeyGmIdle:
		if !idle {
			return Warning{CodeNotAsked, "no idle current was asked for."}, nil
		}
		codes = noCrossingCodes
		if k == KeyGmIdle {
			codes = append(slices.Clone(codes), noSlopeCodes...)
		}
		return Warning{CodeFewPoints, "the points do not allow it."}, codes
	case KeyVt, KeyBeta, KeyTheta:
		switch {
		case k == KeyTheta && r.Vt.Ok() && r.Method == "curve":
			return Warning{CodeNotByMethod, "the curve does not tell it."}, nil
		case r.Vt.Ok():
			return Warning{CodeNotByMethod, "the method " + r.Method + " has none."}, nil
		case len(r.VtBy) > 0 && !r.Has(CodeMethodNotValid): // there is one, and it was chosen not to be shown
			return Warning{CodeNotAsked, "constant-current values only were asked for."}, nil
		}
		return Warning{CodeFewPoints, "the points do not allow it."}, noLineCodes
	case KeyGmMax:
		return Warning{CodeFewPoints, "the points do not allow a slope."}, noSlopeCodes
	}
	return Warning{CodeOffNotRead, "the sweep does not show it at the off voltage."}, []string{CodeSpotOnly}
}
