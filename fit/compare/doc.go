// Package compare says whether lots are alike: how far one lot's gate voltages
// are shifted against another's, with an interval that holds what benches and
// sessions do to one lot and not to the other, and what follows from it.
//
// It takes results of single devices and gives back numbers and sentences. One
// quantity and one test lead: Yuen's on 20 % trimmed means, chosen before the data
// are seen. Everything else stands beside it, with adjusted p values. It leaves no
// device out for standing apart from its family, computes no power from the shift
// that was seen, and never decides for the person.
//
// [Lots] goes this way: values of both lots (values.go), serials that stand in both
// (paired.go), the shift (lots.go, shift.go) with the error common to whole lots
// (common.go), the verdict and how many devices would tell (verdict.go, more.go),
// tests beside it (beside.go), whole curves (curves.go, levels.go, maxt.go), gain
// (gain.go) and ways to go on (goingon.go, idle.go). [TrendOf] lays lots out in time
// (trend.go).
package compare
