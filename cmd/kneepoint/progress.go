package main

import (
	"os"

	"github.com/schollz/progressbar/v3"
	"github.com/spf13/cobra"
)

// progress is a bar on a terminal's stderr, and nothing elsewhere.
type progress struct {
	bar   *progressbar.ProgressBar
	label string
	c     *cobra.Command
}

func newProgress(c *cobra.Command, label string) *progress { return &progress{label: label, c: c} }

func (p *progress) set(done, total int64) {
	w := p.c.ErrOrStderr()
	if !isTerminal(w) || total <= 0 {
		return
	}
	if p.bar == nil {
		p.bar = progressbar.NewOptions64(total,
			progressbar.OptionSetWriter(w),
			progressbar.OptionSetDescription(p.label),
			progressbar.OptionSetWidth(30),
			progressbar.OptionClearOnFinish(),
			progressbar.OptionEnableColorCodes(false),
			progressbar.OptionUseANSICodes(os.Getenv("NO_COLOR") == ""),
			progressbar.OptionThrottle(1e8))
	}
	p.bar.ChangeMax64(total)
	_ = p.bar.Set64(done)
}

func (p *progress) end() {
	if p.bar != nil {
		_ = p.bar.Finish()
		p.bar = nil
	}
}
