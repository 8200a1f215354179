package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"lodeswing/analyze"
	"lodeswing/analyze/record"
	"lodeswing/analyze/toy"
	"lodeswing/analyze/toy/sweep"
	"lodeswing/cmd/internal/progress"
	"lodeswing/samples"
	"lodeswing/track/rig"
)

func simulateCommand() *cobra.Command {
	var s simulation
	cmd := &cobra.Command{
		Use:   "simulate RIG",
		Short: "Ask the model of a toy what would be",
		Long: `Simulate moves the toy that RIG describes by its own model and leaves a result
folder: the motion as track.csv and angles.csv, figures, report.html, and findings:
period, amplitude, places of rest with the frequencies of small swings about them,
how the motion goes on, and what the coil draws. RIG is a rig file, a fitted.toml
from a result, or the name of a sample; its [[start]] says how the toy is let go.

Each answer gets a 95 % interval from toys drawn from the rig's own uncertainties
(of a fitted.toml with the covariance of its fit). They are many simulations; where
the motion is irregular they are the only honest answer.

--vary asks at each of many values of a number, or with two --vary at each pair, and
tells how period, amplitude, places of rest and regime change. An address is the
table's name and the key, in the unit of the rig's file; addresses joined by commas
take their values together.
--basins lets the toy go from a grid of places and shows where it comes to rest.
Ctrl-C keeps what is done of these two.`,
		Example: `  lodeswing simulate lantern
  lodeswing simulate fitted.toml --seconds 60
  lodeswing simulate lantern --vary 'base magnet.moment=0.8:1.2:41'
  lodeswing simulate gull.toml --set coil.kick=0.2
  lodeswing simulate buoys --vary 'port stem.spring.rate, starboard stem.spring.rate=20:80:21' --vary 'fairway magnet.moment=0.3:0.9:21'
  lodeswing simulate lantern-ball --basins 60`,
		Args: exactly(1, "one rig file or sample name"),
		ValidArgsFunction: func(cmd *cobra.Command, args []string, _ string) ([]string, cobra.ShellCompDirective) {
			if len(args) > 0 {
				return nil, cobra.ShellCompDirectiveNoFileComp
			}
			return samples.Names(), cobra.ShellCompDirectiveDefault
		},
		RunE: func(cmd *cobra.Command, args []string) error { return s.run(cmd, args[0]) },
	}
	f := cmd.Flags()
	f.StringVar(&s.out, "out", "", "the result `folder` (default: RIG-simulated, here)")
	f.Float64Var(&s.opt.Seconds, "seconds", 0, "length of each motion (default: the rig's duration_s, else 30; with --basins at most 600)")
	f.StringArrayVar(&s.set, "set", nil, "change a number first: `address=value`, as often as needed")
	f.StringArrayVar(&s.vary, "vary", nil, "ask at many values: `address=from:to:number`, once or twice")
	f.IntVar(&s.side, "basins", 0, "release the toy from `N` × N places and show where each ends")
	f.IntVar(&s.opt.Ensemble, "ensemble", 40, "toys drawn from the rig's uncertainties for the intervals; 0: no intervals")
	f.Float64Var(&s.reach, "reach", 70, "places of rest, and releases, are sought this far from hanging or standing, `degrees`")
	f.BoolVar(&s.opt.Undriven, "coil-off", false, "with the battery taken out")
	f.Float64Var(&s.opt.Tol, "tolerance", 1e-9, "error allowed per step of the integration")
	f.Uint64Var(&s.opt.Seed, "seed", 1, "of the drawn toys")
	f.BoolVar(&s.json, "json", false, "print the findings as JSON, for machines")
	f.BoolVarP(&s.quiet, "quiet", "q", false, "no progress")
	_ = cmd.MarkFlagDirname("out") // completion only
	return cmd
}

// simulation is one call of the command.
type simulation struct {
	out, name   string
	set, vary   []string
	side        int
	reach       float64
	opt         sweep.Options
	json, quiet bool
	meter       *progress.Meter
	rec         *record.Record
}

func (s *simulation) run(cmd *cobra.Command, name string) error {
	if err := s.checkFlags(cmd); err != nil {
		return err
	}
	r, err := samples.Open(name)
	if err != nil {
		return err
	}
	for _, text := range s.set {
		g, err := sweep.ParseRange(r, text)
		if err != nil {
			return usageError{err}
		}
		if len(g.Values) != 1 {
			return wrongUse("--set %q: a set number takes one value; for several use --vary", text)
		}
		if r, err = g.With(r, 0); err != nil {
			return err
		}
	}
	var ranges []sweep.Range
	for _, text := range s.vary {
		g, err := sweep.ParseRange(r, text)
		if err != nil {
			return usageError{err}
		}
		ranges = append(ranges, g)
	}
	if s.out == "" {
		s.out = samples.Stem(r) + "-simulated"
	}
	if err := record.CheckTarget(s.out); err != nil {
		return err
	}
	s.name, s.opt.Reach = r.Name, s.reach*math.Pi/180
	s.meter = progress.New(cmd.ErrOrStderr(), s.quiet)
	s.opt.Progress = s.meter.Set
	s.rec = &record.Record{Run: record.Run{
		Version: version, Started: time.Now().UTC().Truncate(time.Second),
		Rig:     record.Rig{Name: r.Name, File: filepath.Base(r.Path), Text: string(r.Marshal())},
		Options: s.options(),
	}}
	s.rec.Safety = analyze.Safety(r)
	began := time.Now()
	var print func(io.Writer) error
	var stopped error
	switch {
	case s.side > 0:
		print, stopped, err = s.basins(cmd.Context(), r)
	case len(ranges) > 0:
		print, stopped, err = s.sweep(cmd.Context(), r, ranges)
	default:
		print, err = s.motion(cmd.Context(), r)
	}
	if err != nil {
		return err
	}
	s.meter.End()
	s.rec.Run.Took("simulate", time.Since(began))
	// What is done is kept even after Ctrl-C, so the folder is written regardless.
	if err := drawAndWrite(context.WithoutCancel(cmd.Context()), s.rec, s.out, s.meter); err != nil {
		return err
	}
	for _, k := range s.rec.Kept {
		os.Remove(k.Path) // the scratch copy; the folder has its own now
	}
	if err := s.tell(cmd.OutOrStdout(), print); err != nil {
		return err
	}
	return stopped
}

func (s *simulation) checkFlags(cmd *cobra.Command) error {
	switch {
	case len(s.vary) > 2:
		return wrongUse("--vary can be given once or twice, not %d times: join addresses that change together by commas", len(s.vary))
	case len(s.vary) > 0 && s.side > 0:
		return wrongUse("--vary and --basins cannot go together: ask one after the other")
	case cmd.Flags().Changed("basins") && (s.side < 2 || s.side > 1000):
		return wrongUse("--basins takes a number from 2 to 1000, not %d", s.side)
	case cmd.Flags().Changed("seconds") && !(s.opt.Seconds > 0 && s.opt.Seconds <= 1e6):
		return wrongUse("--seconds must be above zero, not %g", s.opt.Seconds)
	case s.opt.Ensemble < 0 || s.opt.Ensemble > 10000:
		return wrongUse("--ensemble takes a number from 0 to 10000, not %d", s.opt.Ensemble)
	case !(s.opt.Tol >= 1e-14 && s.opt.Tol <= 1e-3):
		return wrongUse("--tolerance must lie between 1e-14 and 1e-3, not %g", s.opt.Tol)
	case !(s.reach > 0 && s.reach <= 180):
		return wrongUse("--reach must lie between 0 and 180 degrees, not %g", s.reach)
	}
	return nil
}

// options is what the command was told, for the record.
func (s *simulation) options() map[string]string {
	o := map[string]string{"command": "simulate", "ensemble": fmt.Sprint(s.opt.Ensemble), "tolerance": fmt.Sprint(s.opt.Tol)}
	for i, v := range s.vary {
		o[fmt.Sprintf("vary %d", i+1)] = v
	}
	for i, v := range s.set {
		o[fmt.Sprintf("set %d", i+1)] = v
	}
	if s.opt.Undriven {
		o["coil-off"] = "true"
	}
	if s.side > 0 {
		o["basins"] = fmt.Sprint(s.side)
	}
	return o
}

// motion is the plain question.
func (s *simulation) motion(ctx context.Context, r *rig.Rig) (func(io.Writer) error, error) {
	s.opt.Start = func(n int) { s.meter.Start("simulating "+s.name, n, "toys") }
	res, err := sweep.Motion(ctx, r, s.opt)
	if err != nil {
		return nil, err
	}
	rec := s.rec
	rec.Headline, rec.Cautions, rec.Track, rec.Findings, rec.Curves = res.Headline, res.Cautions, res.Track, res.Findings, res.Curves
	for _, a := range res.Angles {
		rec.Angles = append(rec.Angles, record.Angles(a))
	}
	nan := math.NaN()
	for _, p := range res.Passes {
		rec.Passes = append(rec.Passes, record.Pass{
			Part: p.Part, T: p.T, Energy: p.Energy, Kick: p.Kick, Loss: p.Loss, UEnergy: nan, UKick: nan, ULoss: nan,
		})
	}
	return s.printFindings, nil
}

// sweep varies one number or two.
func (s *simulation) sweep(ctx context.Context, r *rig.Rig, ranges []sweep.Range) (print func(io.Writer) error, stopped, err error) {
	s.opt.Start = func(n int) { s.meter.Start("varying "+ranges[0].Name(), n, "motions") }
	t, stopped := sweep.Vary(ctx, r, ranges, s.opt)
	if t == nil {
		return nil, nil, stopped
	}
	rec := s.rec
	rec.Curves, rec.Findings, rec.Cautions = t.Curves(), t.Findings(r), sweep.Assumed(r)
	rec.Headline = fmt.Sprintf("Simulated, not measured: %d motions of %s, with %s varied.", t.Done, s.name, names(ranges))
	s.cutShort(stopped, t.Done, len(t.Answers), "values")
	if err := s.keep("sweep.csv", t.WriteCSV); err != nil {
		return nil, nil, err
	}
	return func(w io.Writer) error {
		if len(t.Ranges) == 1 {
			if err := printTable(w, t); err != nil {
				return err
			}
		}
		return s.printFindings(w)
	}, stopped, nil
}

func names(ranges []sweep.Range) string {
	var out []string
	for _, g := range ranges {
		out = append(out, g.Words())
	}
	return strings.Join(out, " and ")
}

// basins asks where the toy comes to rest.
func (s *simulation) basins(ctx context.Context, r *rig.Rig) (print func(io.Writer) error, stopped, err error) {
	s.opt.Start = func(n int) { s.meter.Start("releasing "+s.name, n, "releases") }
	b, stopped := sweep.FallInto(ctx, r, s.side, s.opt)
	if b == nil {
		return nil, nil, stopped
	}
	m, err := toy.New(r)
	if err != nil {
		return nil, nil, err
	}
	rec := s.rec
	rec.Curves, rec.Findings, rec.Cautions = b.Curves(), b.Findings(m.Parts()), sweep.Assumed(r)
	rec.Headline = fmt.Sprintf("Simulated, not measured: %d releases of %s, which has %d stable places of rest.", b.Done, s.name, len(b.Rests))
	s.cutShort(stopped, b.Done, len(b.Into), "releases")
	return s.printFindings, stopped, nil
}

// cutShort says so in the record when Ctrl-C came.
func (s *simulation) cutShort(stopped error, done, all int, what string) {
	if stopped != nil {
		s.rec.Cautions = append(s.rec.Cautions, fmt.Sprintf("The work was stopped: %d of %d %s were done, and only these are here.", done, all, what))
	}
}

// keep adds a file to the result folder.
func (s *simulation) keep(name string, write func(io.Writer) error) error {
	f, err := os.CreateTemp("", "lodeswing-*-"+name)
	if err != nil {
		return fmt.Errorf("the table %s: %w", name, err)
	}
	err = write(f)
	if e := f.Close(); err == nil {
		err = e
	}
	if err != nil {
		os.Remove(f.Name())
		return fmt.Errorf("the table %s: %w", name, err)
	}
	s.rec.Kept = append(s.rec.Kept, record.Kept{Name: name, Path: f.Name()})
	return nil
}

func (s *simulation) tell(w io.Writer, print func(io.Writer) error) error {
	if s.json {
		return record.WriteFindings(w, s.rec)
	}
	fmt.Fprintln(w, s.rec.Headline)
	if err := print(w); err != nil {
		return err
	}
	for _, c := range s.rec.Cautions {
		fmt.Fprintln(w, "Caution:", c)
	}
	fmt.Fprintln(w, "The result is in", s.out+"; open", filepath.Join(s.out, "report.html"))
	return nil
}

func (s *simulation) printFindings(w io.Writer) error {
	t := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	for i := range s.rec.Findings {
		f := &s.rec.Findings[i]
		subject := f.Subject
		if subject == "" {
			subject = s.name
		}
		if f.Text != "" {
			if !strings.HasSuffix(s.rec.Headline, f.Text) {
				fmt.Fprintf(t, "%s\t%s\n", f.Name, f.Text)
			}
			continue
		}
		shown := f.Display()
		if math.IsNaN(f.U) {
			fmt.Fprintf(t, "%s: %s\t%s\n", subject, f.Name, shown)
			continue
		}
		fmt.Fprintf(t, "%s: %s\t%s\t%s\n", subject, f.Name, shown, shown.Interval())
	}
	return t.Flush()
}

// mostRows is how many rows of a sweep's table are printed; sweep.csv has all.
const mostRows = 60

func printTable(w io.Writer, tb *sweep.Table) error {
	t := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	g := tb.Ranges[0]
	fmt.Fprintf(t, "%s %s", g.Name(), g.Unit)
	for _, p := range tb.Parts {
		fmt.Fprintf(t, "\t%s: period s\tamplitude °", p)
	}
	fmt.Fprint(t, "\tplaces of rest\tregime\n")
	every := (len(tb.Answers) + mostRows - 1) / mostRows
	for i, a := range tb.Answers {
		if a == nil || i%every != 0 {
			continue
		}
		fmt.Fprintf(t, "%.5g", g.Shown[i])
		for k := range tb.Parts {
			if k >= len(a.Parts) {
				fmt.Fprint(t, "\t\t")
				continue
			}
			fmt.Fprintf(t, "\t%s\t%s", digits(a.Parts[k].Period, 5), digits(a.Parts[k].Amplitude*180/math.Pi, 4))
		}
		if a.Problem != "" {
			fmt.Fprintf(t, "\t\t%s\n", a.Problem)
			continue
		}
		fmt.Fprintf(t, "\t%d\t%s\n", a.StableRests(), a.Regime)
	}
	return t.Flush()
}

func digits(x float64, n int) string {
	if math.IsNaN(x) {
		return "-"
	}
	return fmt.Sprintf("%.*g", n, x)
}
