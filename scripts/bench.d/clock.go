//go:build ignore

// Clock runs a command and prints what it cost: wall time in ms, user and
// system time in ms, greatest resident memory in kB, on one line of standard
// output for each run. The command's own output goes to the file named with -o
// (default: nowhere). It stops at the first run that fails. Linux only.
//
//	clock [-n RUNS] [-o FILE] COMMAND ARGUMENT...
package main

import (
	"flag"
	"fmt"
	"os"
	"os/exec"
	"syscall"
	"time"
)

func main() {
	runs := flag.Int("n", 1, "number of runs")
	out := flag.String("o", os.DevNull, "file for the command's output")
	flag.Parse()
	if flag.NArg() == 0 {
		flag.Usage()
		os.Exit(2)
	}
	for range *runs {
		if err := once(*out, flag.Args()); err != nil {
			fmt.Fprintf(os.Stderr, "clock: %s: %v\n", flag.Arg(0), err)
			os.Exit(1)
		}
	}
}

func once(out string, command []string) error {
	f, err := os.Create(out)
	if err != nil {
		return err
	}
	defer f.Close()
	cmd := exec.Command(command[0], command[1:]...)
	cmd.Stdout, cmd.Stderr = f, os.Stderr
	start := time.Now()
	err = cmd.Run()
	wall := time.Since(start)
	if err != nil {
		return err
	}
	use := cmd.ProcessState.SysUsage().(*syscall.Rusage)
	cpu := cmd.ProcessState.UserTime() + cmd.ProcessState.SystemTime()
	fmt.Printf("%.3f %.3f %d\n", wall.Seconds()*1e3, cpu.Seconds()*1e3, use.Maxrss)
	return nil
}
