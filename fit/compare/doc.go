// Package compare says whether lots are alike: how far one lot's gate voltages
// are shifted against another's, with an interval that holds what benches and
// sessions have in common, and what follows from it.
//
// It takes results of single devices and gives back numbers and sentences. One
// quantity and one test lead: Yuen's on 20 % trimmed means, chosen before the data
// are seen. Everything else stands beside it, with adjusted p values. It leaves no
// device out for standing apart from its family, computes no power from the shift
// that was seen, and never decides for the person.
package compare
