// Package progress shows how far a long work is: a bar with rate and time left
// on a terminal, plain lines in a pipe or a log. What comes in: a count of
// things done, of how many. What goes out: text on the error stream.
package progress

import (
	"fmt"
	"io"
	"os"
	"time"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"
)

// Meter shows one work at a time. The zero value, and nil, show nothing.
type Meter struct {
	out      io.Writer
	terminal bool
	every    time.Duration // between two plain lines

	what, unit string
	bar        *progressbar.ProgressBar
	began      time.Time
	said       time.Time
	done       int
	total      int
}

// New returns a meter that writes to out: a bar if out is a terminal and plain
// lines otherwise. With quiet it shows nothing.
func New(out io.Writer, quiet bool) *Meter {
	if quiet {
		return nil
	}
	f, ok := out.(*os.File)
	return &Meter{out: out, terminal: ok && term.IsTerminal(int(f.Fd())), every: 5 * time.Second}
}

// Start begins a work of total steps (0: not known), called what, counted in unit.
func (m *Meter) Start(what string, total int, unit string) {
	if m == nil || m.out == nil {
		return
	}
	m.what, m.unit, m.total, m.done = what, unit, total, 0
	m.began, m.said = time.Now(), time.Now()
	if !m.terminal {
		fmt.Fprintf(m.out, "%s …\n", what)
		return
	}
	max := total
	if max <= 0 {
		max = -1
	}
	m.bar = progressbar.NewOptions(max,
		progressbar.OptionSetWriter(m.out),
		progressbar.OptionSetDescription(what),
		progressbar.OptionShowCount(),
		progressbar.OptionShowIts(),
		progressbar.OptionSetItsString(unit),
		progressbar.OptionSetPredictTime(true),
		progressbar.OptionThrottle(100*time.Millisecond),
		progressbar.OptionClearOnFinish(),
		progressbar.OptionSetWidth(24),
	)
}

// Set says that n steps are done.
func (m *Meter) Set(n int) {
	if m == nil || m.out == nil || m.began.IsZero() {
		return
	}
	m.done = n
	if m.bar != nil {
		_ = m.bar.Set(n) // a bar that cannot be drawn is no reason to stop the work
		return
	}
	if now := time.Now(); now.Sub(m.said) >= m.every {
		m.said = now
		fmt.Fprintf(m.out, "%s: %s\n", m.what, m.state(now))
	}
}

// End finishes the work begun by Start and leaves one line that sums it up.
func (m *Meter) End() {
	if m == nil || m.out == nil || m.began.IsZero() {
		return
	}
	if m.bar != nil {
		_ = m.bar.Finish()
		m.bar = nil
	}
	took := time.Since(m.began)
	line := fmt.Sprintf("%s: done in %s", m.what, took.Round(10*time.Millisecond))
	if m.done > 0 && took > 0 {
		line = fmt.Sprintf("%s: %d %s in %s (%.0f %s/s)", m.what, m.done, m.unit, took.Round(10*time.Millisecond),
			float64(m.done)/took.Seconds(), m.unit)
	}
	fmt.Fprintln(m.out, line)
	m.began = time.Time{}
}

func (m *Meter) state(now time.Time) string {
	took := now.Sub(m.began).Seconds()
	rate := float64(m.done) / took
	if m.total <= 0 {
		return fmt.Sprintf("%d %s, %.0f %s/s", m.done, m.unit, rate, m.unit)
	}
	line := fmt.Sprintf("%d of %d %s, %.0f %s/s", m.done, m.total, m.unit, rate, m.unit)
	if rate > 0 {
		left := time.Duration(float64(m.total-m.done) / rate * float64(time.Second))
		line += fmt.Sprintf(", %s left", left.Round(time.Second))
	}
	return line
}
