package job

import (
	"gatesill/acquire/bench"
	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"io"
)

// HelpCodes lists every warning and flag code with its meaning and what to do.
func HelpCodes(env *Env) error {
	if env.JSON {
		return report.CodesJSON(env.Out, fit.Codes)
	}
	return report.CodesTable(env.Out, fit.Codes, env.style())
}

// HelpCode explains one code, and reports whether there is such a code.
func HelpCode(env *Env, code string) (bool, error) {
	for _, c := range fit.Codes {
		if c.Code == code {
			return true, report.CodesTable(env.Out, []fit.CodeInfo{c}, env.style())
		}
	}
	return false, nil
}

// HelpRobust explains the robust spread.
func HelpRobust(env *Env) error {
	return report.Sentences(env.Out, lot.RobustWords(), env.style())
}

// HelpBench shows a bench file with every key.
func HelpBench(env *Env) error {
	_, err := io.WriteString(env.Out, bench.Example)
	return err
}
