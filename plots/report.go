package plots

import (
	"bytes"
	_ "embed"
	"fmt"
	"html/template"
	"math"
	"slices"
	"sort"
	"strconv"
	"strings"
	"time"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/track"
)

//go:embed report.html.tmpl
var reportTemplate string

var reportPage = template.Must(template.New("report").Parse(reportTemplate))

// page is what the report's template shows.
type page struct {
	Title    string
	Lead     string
	Filmed   []string
	Safety   []string
	Cautions []string
	Groups   []group
	HasU     bool
	Matched  *matched   // nil where no model was matched
	Behaves  *behaviour // nil where no regime was told
	Figures  []figureOnPage
	Laws     []laws
	Budgets  []budget
	Fits     []fitOnPage
	Run      []record.Fact
	Facts    []record.Fact
	RigText  string
}

type group struct {
	Name string
	Rows []row
}

// row is one finding in the table.
type row struct {
	Name     string
	Value    string // with uncertainty and unit; or the words of a statement
	Wide     bool   // Value is a sentence, and there is no interval
	Interval string
	Limit    bool // Interval is no interval but what the limit holds at
	Method   string
	Cautions []string
}

type figureOnPage struct {
	Number         int
	Title, Caption string
	SVG            template.HTML
}

// onPage gives a figure its number.
func (f *figureShown) onPage(number int) figureOnPage {
	// The SVG is our own drawing; every text in it was escaped there.
	return figureOnPage{number, f.Title, whole(f.Caption), template.HTML(f.SVG)}
}

type laws struct {
	Subject string
	Rows    []law
	Only    bool // one law was tried, so nothing was weighed
}

type law struct {
	Name, Weight, Behind string
	Bar                  int // per cent
}

type budget struct {
	Subject string
	Rows    []budgetLine
}

type budgetLine struct {
	Name, U string
	Shares  []share
	Small   string // sources that hardly contribute
}

type share struct {
	Source, U string
	Percent   string
	Bar       int
}

type fitOnPage struct {
	Name         string
	Free, Held   []parameter
	NotSeparable []string
	Why          string
	Quality      string
	Warning      string
}

// fitNames are the fits' names in plain words.
var fitNames = map[string]string{"decay.fit": "The free decay", "match.fit": "The model of the toy", "kick.ledger": "The energy ledger"}

type parameter struct{ Name, Value string }

// report makes report.html: one file that needs nothing else.
func report(r *record.Record, figures []figureShown) ([]byte, error) {
	p := page{
		Title: r.Run.Rig.Name, Lead: whole(r.Headline), Filmed: each(filmed(r), whole), Safety: r.Safety, Cautions: each(r.Cautions, whole),
		Run: provenance(r), RigText: r.Run.Rig.Text,
	}
	if p.Title == "" {
		p.Title = "Measurement"
		if r.Run.Clip != nil {
			p.Title = r.Run.Clip.File
		}
	}
	if r.Run.Clip != nil {
		for _, f := range r.Run.Clip.List() {
			if f.Name != "sha256" && f.Name != "path" { // said above, and of no use elsewhere
				p.Facts = append(p.Facts, f)
			}
		}
	}
	fits, others, rest := matching(r.Findings, r.Fits, figures, 1)
	p.Matched = fits
	p.Behaves, others, rest = apart(others, rest, len(figures)-len(rest)+1)
	p.Groups, p.HasU = groups(others)
	for i, f := range rest {
		p.Figures = append(p.Figures, f.onPage(len(figures)-len(rest)+i+1))
	}
	for _, f := range r.Fits {
		if len(f.Candidates) > 0 {
			p.Laws = append(p.Laws, weighed(f))
		}
		p.Fits = append(p.Fits, fitView(f))
	}
	p.Budgets = budgets(r.Findings)
	if p.Matched != nil { // its own stand in its section
		p.Budgets = budgets(slices.DeleteFunc(slices.Clone(r.Findings), func(f finding.Finding) bool { return strings.HasPrefix(f.Key, "match.") }))
	}
	var b bytes.Buffer
	if err := reportPage.Execute(&b, p); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}

// groups puts the findings under the part, bob or pair that they are about, in
// the order in which they were found.
func groups(all []finding.Finding) (out []group, hasU bool) {
	index, lastMethod := map[string]int{}, map[int]string{}
	for _, f := range all {
		k, ok := index[f.Subject]
		if !ok {
			k = len(out)
			index[f.Subject] = k
			out = append(out, group{Name: f.Subject})
		}
		r := row{Name: f.Name, Method: f.Method, Cautions: slices.Clone(f.Cautions)}
		shown := f.Display()
		switch f.Kind {
		case finding.Statement:
			r.Value, r.Wide = f.Text, true
		case finding.Undecided:
			r.Value, r.Wide = "Not determined. "+f.Text, true
		case finding.UpperLimit:
			r.Value, r.Interval, r.Limit = tied(shown.String()), "at 95 % confidence", true
			if f.Text != "" {
				r.Cautions = append([]string{f.Text}, r.Cautions...)
			}
		default:
			r.Value, r.Interval = tied(shown.String()), shown.Interval()
			hasU = hasU || shown.U != ""
			if r.Value == "" {
				r.Value = "not known"
			}
			if f.Text != "" {
				r.Cautions = append([]string{f.Text}, r.Cautions...)
			}
		}
		if n := len(out[k].Rows); n > 0 && r.Method != "" && r.Method == lastMethod[k] {
			r.Method = "as the row above"
		} else {
			lastMethod[k] = r.Method
		}
		out[k].Rows = append(out[k].Rows, r)
	}
	return out, hasU
}

// tied keeps a number, its uncertainty and its unit on one line.
func tied(s string) string {
	return strings.ReplaceAll(strings.ReplaceAll(s, " ", "\u00a0"), "\u00a0×\u00a0", " ×\u00a0")
}

// whole keeps the sign for per cent with its number.
func whole(s string) string { return strings.ReplaceAll(s, " %", "\u00a0%") }

func each(all []string, f func(string) string) []string {
	out := make([]string, len(all))
	for i, s := range all {
		out[i] = f(s)
	}
	return out
}

// weighed shows the laws that were tried, the likeliest first.
func weighed(f finding.Fit) laws {
	out := laws{Subject: f.Subject, Only: len(f.Candidates) == 1}
	sorted := append([]finding.Candidate(nil), f.Candidates...)
	sort.SliceStable(sorted, func(i, j int) bool { return sorted[i].BIC < sorted[j].BIC })
	for _, c := range sorted {
		l := law{Name: c.Name, Weight: percent(c.Weight), Bar: bar(c.Weight)}
		if behind := c.BIC - sorted[0].BIC; behind > 0 {
			l.Behind = strconv.FormatFloat(behind, 'f', 1, 64)
			if behind >= 1000 {
				l.Behind = "over 1000"
			}
		} else {
			l.Behind = "best"
		}
		out.Rows = append(out.Rows, l)
	}
	return out
}

// budgets are the uncertainties' sources, under the part that they are about.
func budgets(all []finding.Finding) []budget {
	var out []budget
	index := map[string]int{}
	for _, f := range all {
		if f.Kind != finding.Measured || len(f.Budget) == 0 || !(f.U > 0) {
			continue
		}
		k, ok := index[f.Subject]
		if !ok {
			k = len(out)
			index[f.Subject] = k
			out = append(out, budget{Subject: f.Subject})
		}
		out[k].Rows = append(out[k].Rows, budgetRow(f))
	}
	return out
}

// budgetRow shows what an uncertainty is made of, the largest share first. What
// is under a hundredth of the whole is only named.
func budgetRow(f finding.Finding) budgetLine {
	out := budgetLine{Name: f.Name, U: tied(finding.DisplayU(f.U, f.Unit))}
	sum := 0.0
	for _, s := range f.Budget {
		sum += s.U * s.U
	}
	sorted := slices.Clone(f.Budget)
	sort.SliceStable(sorted, func(i, j int) bool { return sorted[i].U > sorted[j].U })
	var small []string
	for _, s := range sorted {
		if !(s.U > 0) || sum == 0 {
			continue
		}
		part := s.U * s.U / sum
		if part < 0.01 {
			small = append(small, s.Source)
			continue
		}
		out.Shares = append(out.Shares, share{Source: s.Source, U: tied(finding.DisplayU(s.U, f.Unit)), Percent: percent(part), Bar: bar(part)})
	}
	if len(small) > 0 {
		out.Small = strings.Join(small, ", ")
	}
	return out
}

func fitView(f finding.Fit) fitOnPage {
	name, ok := fitNames[f.Key]
	if !ok {
		name = f.Key
	}
	if f.Subject != "" {
		name += ": " + f.Subject
	}
	out := fitOnPage{Name: name, NotSeparable: f.NotSeparable}
	if why := strings.TrimSuffix(f.Why, "."); why != "" {
		out.Why = "End of the search: " + why + "."
	}
	if !f.Converged {
		out.Warning = "The fit did not come to an end; its numbers are to be doubted."
	}
	if f.DegreesOf > 0 {
		out.Quality = fmt.Sprintf("χ² per degree of freedom: %s, with %d degrees of freedom.", finding.DisplayValue(f.ChiSquare/float64(f.DegreesOf), 0.05*f.ChiSquare/float64(f.DegreesOf), "1").Value, f.DegreesOf)
	}
	for _, p := range f.Free {
		out.Free = append(out.Free, parameter{p.Name, finding.DisplayValue(p.Value, p.U, p.Unit).String()})
	}
	for _, p := range f.Held {
		out.Held = append(out.Held, parameter{p.Name, finding.DisplayValue(p.Value, p.U, p.Unit).String()})
	}
	return out
}

func percent(share float64) string {
	p := 100 * share
	switch {
	case math.IsNaN(p):
		return ""
	case p >= 99.95 && share < 1:
		return "over 99.9 %"
	case p >= 10:
		return strconv.FormatFloat(p, 'f', 0, 64) + " %"
	case p >= 0.1:
		return strconv.FormatFloat(p, 'f', 1, 64) + " %"
	case p > 0:
		return "under 0.1 %"
	}
	return "0 %"
}

func bar(share float64) int {
	if math.IsNaN(share) {
		return 0
	}
	return int(math.Round(100 * math.Min(math.Max(share, 0), 1)))
}

// relative writes a relative uncertainty in per cent to two digits.
func relative(u float64) string {
	return finding.DisplayU(100*u, "1") + " %"
}

// filmed says in sentences what was filmed and how well the picture is known.
func filmed(r *record.Record) []string {
	var out []string
	t := r.Track
	if t == nil {
		for _, a := range r.Angles {
			if n := len(a.T); n > 1 {
				out = append(out, fmt.Sprintf("An angle table of “%s”: %d samples over %s.", a.Part, n, seconds(a.T[n-1]-a.T[0])))
			}
		}
		return out
	}
	n, last := 0, 0.0
	for i := range t.Bobs {
		if s := t.Bobs[i].Samples; len(s) > n {
			n, last = len(s), s[len(s)-1].T-s[0].T
		}
	}
	what := "A track"
	if r.Run.Clip != nil && r.Run.Clip.File != "" {
		what = "The clip " + r.Run.Clip.File
	}
	s := fmt.Sprintf("%s: %s, %d frames", what, seconds(last), n)
	if n > 1 && last > 0 {
		s += fmt.Sprintf(", %.1f a second", float64(n-1)/last)
	}
	if t.Cal.PictureW > 0 {
		s += fmt.Sprintf(", %d × %d pixels", t.Cal.PictureW, t.Cal.PictureH)
	}
	out = append(out, s+".")
	for i := range t.Bobs {
		b := &t.Bobs[i]
		on := ""
		if b.Part != "" {
			on = " on the part “" + b.Part + "”"
		}
		missing := len(b.Samples) - len(b.Usable())
		seen := "measured in every frame"
		if missing > 0 {
			seen = fmt.Sprintf("measured in %d of %d frames", len(b.Samples)-missing, len(b.Samples))
		}
		out = append(out, fmt.Sprintf("The bob “%s”%s, %s.", b.Name, on, seen))
	}
	if t.Cal.ScaleFrom != "" {
		s := "Scale: " + t.Cal.ScaleFrom
		if t.Cal.UScale > 0 {
			s += "; lengths are known to " + relative(t.Cal.UScale)
		}
		out = append(out, s+".")
	}
	switch {
	case t.Cal.VerticalKnown && t.Cal.VerticalFrom != "":
		s := "Vertical: " + t.Cal.VerticalFrom
		if t.Cal.UVertical > 0 {
			s += ", known to " + finding.DisplayU(t.Cal.UVertical, "rad")
		}
		out = append(out, s+".")
	case t.Cal.PictureW > 0:
		out = append(out, "Vertical: nothing in the picture shows it, so the picture's own upright was taken.")
	}
	if !math.IsNaN(t.BrokeAt) && t.BrokeBy != "" {
		// The clip says itself that it was measured as far as it goes.
		out = append(out, fmt.Sprintf("The clip can be followed up to %s. %s", seconds(t.BrokeAt), t.BrokeBy))
	}
	return out
}

func seconds(s float64) string { return strconv.FormatFloat(s, 'f', 2, 64) + " s" }

// provenance says what made the record from what.
func provenance(r *record.Record) []record.Fact {
	var out []record.Fact
	add := func(name, value string) {
		if value != "" {
			out = append(out, record.Fact{Name: name, Value: value})
		}
	}
	run := &r.Run
	add("Program", strings.TrimSpace("lodeswing "+run.Version))
	if !run.Started.IsZero() {
		add("Measured", run.Started.UTC().Format(time.RFC1123))
	}
	if c := run.Clip; c != nil {
		add("Clip", c.File)
		add("SHA-256", c.SHA256)
		if c.Bytes > 0 {
			add("Size", strconv.FormatInt(c.Bytes, 10)+" bytes")
		}
	}
	add("Rig", run.Rig.File)
	if t := r.Track; t != nil {
		calibration(&t.Cal, add)
	}
	keys := make([]string, 0, len(run.Options))
	for k := range run.Options {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	for _, k := range keys {
		add("Option "+k, run.Options[k])
	}
	for _, d := range run.Durations {
		add("Time for "+d.Step, finding.DisplayValue(d.Seconds, d.Seconds*0.05, "s").Value+" "+finding.DisplayValue(d.Seconds, d.Seconds*0.05, "s").Unit)
	}
	return out
}

func calibration(c *track.Calibration, add func(name, value string)) {
	if c.MetresPerPixel > 0 {
		add("Scale", fmt.Sprintf("%s mm a pixel", strconv.FormatFloat(1e3*c.MetresPerPixel, 'g', 6, 64)))
	}
	for _, s := range c.ScaleShares {
		add("Scale's uncertainty from "+s.Source, relative(s.U))
	}
	if c.DistanceM > 0 {
		add("Lens to plane of motion", finding.DisplayValue(c.DistanceM, 0.01*c.DistanceM, "m").Value+" mm")
	}
	if c.ReadoutS > 0 {
		add("Picture read-out", finding.DisplayValue(c.ReadoutS, c.UReadoutS, "s").String())
	}
	if c.ExposureS > 0 {
		add("Exposure", finding.DisplayValue(c.ExposureS, 0.05*c.ExposureS, "s").Value+" ms")
	}
	if c.RateFactor > 0 && c.RateFactor != 1 {
		add("Slow motion undone", strconv.FormatFloat(c.RateFactor, 'g', 6, 64)+" ×")
	}
	if c.UClock > 0 {
		add("Camera's clock known to", strconv.FormatFloat(1e6*c.UClock, 'g', 3, 64)+" parts per million")
	}
	if c.StandDriftRatio > 0 {
		add("Base's motion over the bob's", percent(c.StandDriftRatio))
	}
}
