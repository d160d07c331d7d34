package job

import (
	"slices"
	"testing"

	"gatesill/acquire/table"
	"gatesill/fit"
)

// Every code that the reader of files raises stands in the register that the
// help shows, as do those of fit and lot, which share its constants.
func TestCodesOfTheReaderAreRegistered(t *testing.T) {
	for _, c := range []string{table.CodeSameRows, table.CodeFlagWins, table.CodeUnitDoubtful, table.CodeCommentsDiffer, table.CodeCutOff, table.CodeColumnNotUsed} {
		if !slices.ContainsFunc(fit.Codes, func(i fit.CodeInfo) bool { return i.Code == c }) {
			t.Errorf("%s is in no register", c)
		}
	}
}
