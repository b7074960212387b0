package main

import (
	"fmt"
	"io"
	"os"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"
)

// display shows on stderr how far a long task is: a bar with the time left on a
// terminal, a line every tenth of the way elsewhere, nothing when quiet.
type display struct {
	out   io.Writer
	quiet bool
}

// stage implements progressFunc.
func (d display) stage(label string, total int64) func(int64) {
	update := d.open(label, total)
	return func(done int64) { update(done, "") }
}

// open starts a stage; the function that it returns takes how much is done and a
// word on the state of things.
func (d display) open(label string, total int64) func(done int64, state string) {
	if d.quiet || total <= 0 {
		return func(int64, string) {}
	}
	if file, ok := d.out.(*os.File); ok && term.IsTerminal(int(file.Fd())) {
		bar := progressbar.NewOptions64(total,
			progressbar.OptionSetWriter(d.out),
			progressbar.OptionSetDescription(label),
			progressbar.OptionThrottle(200*time.Millisecond),
			progressbar.OptionSetPredictTime(true),
			progressbar.OptionSetElapsedTime(true),
			progressbar.OptionFullWidth(),
			progressbar.OptionClearOnFinish(),
		)
		return func(done int64, state string) {
			if state != "" {
				bar.Describe(label + "  " + state)
			}
			bar.Set64(min(done, total))
		}
	}
	begun, next := time.Now(), int64(0)
	return func(done int64, state string) {
		if done < next || (done < total && time.Since(begun) < time.Second) {
			return
		}
		next = done + max(1, total/10)
		spent := time.Since(begun)
		left := time.Duration(float64(spent) * (float64(total)/float64(max(done, 1)) - 1))
		fmt.Fprintf(d.out, "%s: %d%%, %s spent, about %s left%s\n", label, 100*min(done, total)/total,
			spent.Round(time.Second), max(0, left).Round(time.Second), prefixed("; ", state))
	}
}

func prefixed(prefix, s string) string {
	if s == "" {
		return ""
	}
	return prefix + s
}
