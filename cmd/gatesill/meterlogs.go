package main

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"gatesill/cmd/internal/job"
	"gatesill/store/record"
)

// logRoles are the roles that a log of --meter-logs may have.
var logRoles = []string{"gate", "current", "load", "drain", "supply", "temperature", "notes"}

// aRole says what is wrong with the name of a log.
func aRole(name string) string {
	if slices.Contains(logRoles, name) {
		return ""
	}
	return fmt.Sprintf("%q is no role; there are %s", name, strings.Join(logRoles, ", "))
}

// checkLogs refuses flags of meter logs without them, and the other way round.
func checkLogs(rq *job.ImportRequest) error {
	const example = "gatesill import LOT --meter-logs gate=FILE,current=FILE"
	switch {
	case len(rq.MeterLogs) == 0 && len(rq.Files) == 0:
		return job.Usage("usage: gatesill import LOT FILE..., or --meter-logs gate=FILE,current=FILE", "gatesill import: no file named")
	case len(rq.MeterLogs) == 0 && (rq.Device != "" || len(rq.LogTimes) > 0 || rq.LogZone != "" || rq.LogDate != ""):
		return job.Usage(example, "--device, --log-times, --log-zone and --log-date go with --meter-logs")
	case len(rq.MeterLogs) == 0:
		return nil
	case len(rq.Files) > 0:
		return job.Usage(example, "--meter-logs names its files, %s is one too many", rq.Files[0])
	case rq.MeterLogs["gate"] == "":
		return job.Usage(example, "--meter-logs: no log of the gate meter")
	case rq.MeterLogs["current"] == "" && rq.MeterLogs["load"] == "" && rq.MeterLogs["drain"] == "":
		return job.Usage(example, "--meter-logs: none of current, load and drain beside the gate")
	}
	if rq.Device != "" {
		if err := record.CheckName("device", rq.Device); err != nil {
			return job.Usage("--device D7", "--device: %v", err)
		}
	}
	if rq.LogDate != "" {
		if _, err := time.Parse(time.DateOnly, rq.LogDate); err != nil {
			return job.Usage("--log-date 2026-05-20", "--log-date %s: no date, want YYYY-MM-DD", rq.LogDate)
		}
	}
	return nil
}
