package job

import (
	"gatesill/acquire/bench"
	"gatesill/fit"
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

// HelpBench shows a bench file with every key.
func HelpBench(env *Env) error {
	_, err := io.WriteString(env.Out, bench.Example)
	return err
}
