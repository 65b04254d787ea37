package main

import (
	"fmt"
	"time"

	"github.com/schollz/progressbar/v3"
)

// bar shows on a terminal how many parts are done, the rate and the time left;
// nothing elsewhere. A nil bar does nothing.
type bar struct{ shown *progressbar.ProgressBar }

// newBar starts a bar for a number of parts. There is none where standard
// error is no terminal, and none where the results themselves run over the
// same terminal.
func (b *batch) newBar(what string, parts int) *bar {
	if b.quiet || !isTerminal(b.s.err) || b.streaming && isTerminal(b.s.out) {
		return nil
	}
	return &bar{progressbar.NewOptions(parts,
		progressbar.OptionSetWriter(b.s.err),
		progressbar.OptionSetDescription(what),
		progressbar.OptionShowCount(),
		progressbar.OptionShowIts(),
		progressbar.OptionSetItsString("parts"),
		progressbar.OptionSetPredictTime(true),
		progressbar.OptionSetWidth(20),
		progressbar.OptionThrottle(100*time.Millisecond),
		progressbar.OptionSetRenderBlankState(true),
		progressbar.OptionOnCompletion(func() { fmt.Fprintln(b.s.err) }),
	)}
}

// grow counts parts that were found only when a file was read.
func (p *bar) grow(parts int) {
	if p != nil && parts > 0 {
		p.shown.ChangeMax(p.shown.GetMax() + parts)
	}
}

func (p *bar) add() {
	if p != nil {
		_ = p.shown.Add(1) // a terminal that can't be written to is no reason to stop
	}
}

func (p *bar) finish() {
	if p != nil && !p.shown.IsFinished() {
		_ = p.shown.Finish()
	}
}
