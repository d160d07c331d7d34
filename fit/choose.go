package fit

// Choose makes the extrapolated threshold of one method the one that is shown:
// "curve", "sqrt", "linear" or "ratio"; "current" shows none, "auto" leaves the choice
// by region as it is. Where the method is not valid for the points, the
// extrapolated threshold is taken back and a warning says so.
func (r *Result) Choose(method string) {
	if method == "auto" || method == "" || r.Method == method {
		return
	}
	had := r.Vt.Ok()
	r.Vt, r.Beta, r.Theta = None(), None(), None()
	r.Method = "current"
	if method == "current" {
		return
	}
	if t, ok := r.VtBy[method]; ok {
		r.Vt, r.Beta, r.Theta, r.Method = t.Vt, t.Beta, t.Theta, method
		return
	}
	if had || r.State == Measured {
		r.Warnings = append(r.Warnings, Warning{CodeMethodNotValid,
			"The method " + method + " is not valid in the region that the points cover: no extrapolated threshold by it."})
	}
}
