package plots

import (
	"bytes"
	"image"
	"image/color"
	"image/png"
	"math"
	"math/rand/v2"
	"time"

	"lodeswing/analyze/finding"
	"lodeswing/analyze/record"
	"lodeswing/track"
)

// swing is the record of a lantern that nobody built: a damped swing with
// noise, of which every table, curve and finding is filled.
func swing() *record.Record {
	rng := rand.New(rand.NewPCG(11, 2))
	const (
		rate, length, period, tau, scale = 60.0, 0.28, 1.0634, 30.0, 0.28 / 300
		originU, originV                 = 360.0, 80.0
	)
	tr := &track.Track{BrokeAt: math.NaN(), Cal: track.Calibration{
		MetresPerPixel: scale, UScale: 0.0021, ScaleFrom: "the rig's 100 mm between two marks", VerticalFrom: "the plumb line", VerticalKnown: true,
		UVertical: 0.0012, UClock: 50e-6, OriginU: originU, OriginV: originV, PictureW: 720, PictureH: 480, RateFactor: 1,
		ScaleShares: []track.Share{{Source: "the ruler's length", U: 0.002}, {Source: "reading its ends", U: 0.0006}}, ReadoutS: 0.012, UReadoutS: 0.001,
	}}
	bob := track.Bob{Name: "lamp", Part: "arm"}
	a := record.Angles{Part: "arm"}
	fit := finding.Line{Name: "fit", Role: finding.Model}
	data := finding.Line{Name: "measured", Role: finding.Data}
	res := finding.Line{Name: "measured minus fit", Role: finding.Residual}
	phase := finding.Line{Role: finding.Data}
	for k := range 1200 {
		t := float64(k) / rate
		env := 0.7 * math.Exp(-t/tau)
		model := env * math.Cos(2*math.Pi*t/period)
		rateNow := -env * 2 * math.Pi / period * math.Sin(2*math.Pi*t/period)
		noise := 2e-4 * rng.NormFloat64()
		q := model + noise
		x, z := length*math.Sin(q), -length*math.Cos(q)
		s := track.Sample{Frame: k, T: t, X: x, Z: z, U: originU + x/scale, V: originV - z/scale, State: track.Seen, Plane: track.Cov{AA: 1e-9, BB: 1e-9}, Pixel: track.Cov{AA: 1e-3, BB: 1e-3}}
		if k > 500 && k < 540 {
			s.State, s.X, s.Z, s.U, s.V = track.Missing, math.NaN(), math.NaN(), math.NaN(), math.NaN()
			q = math.NaN()
		}
		bob.Samples = append(bob.Samples, s)
		a.T, a.Angle, a.U = append(a.T, t), append(a.Angle, q), append(a.U, 2e-4)
		a.Rate, a.URate = append(a.Rate, rateNow), append(a.URate, 0.01)
		data.X, data.Y = append(data.X, t), append(data.Y, q)
		fit.X, fit.Y = append(fit.X, t), append(fit.Y, model)
		res.X, res.Y = append(res.X, t), append(res.Y, q-model)
		phase.X, phase.Y = append(phase.X, q), append(phase.Y, rateNow)
	}
	tr.Bobs = []track.Bob{bob}

	env := finding.Line{Name: "turning points", Role: finding.Mark}
	law := finding.Line{Name: "viscous friction and air drag", Role: finding.Model}
	alt := finding.Line{Name: "viscous friction alone", Role: finding.Model}
	for i := range 38 {
		t := 0.5 * period * float64(i)
		y := 0.7 * math.Exp(-t/tau)
		env.X, env.Y = append(env.X, t), append(env.Y, y+3e-3*rng.NormFloat64())
		env.Lo, env.Hi = append(env.Lo, y-6e-3), append(env.Hi, y+6e-3)
		law.X, law.Y = append(law.X, t), append(law.Y, y)
		law.Lo, law.Hi = append(law.Lo, y-4e-3), append(law.Hi, y+4e-3)
		alt.X, alt.Y = append(alt.X, t), append(alt.Y, y*(1+0.001*float64(i)))
	}
	spec := finding.Line{Name: "power", Role: finding.Data}
	for i := 1; i < 900; i++ {
		f := float64(i) / 30
		d := (f - 1/period) * 20
		p := 0.5/(1+d*d*d*d) + 1e-7*(1+0.5*rng.Float64())
		spec.X, spec.Y = append(spec.X, f), append(spec.Y, p)
	}
	deg := 180 / math.Pi
	angle := finding.Axis{Label: "angle", Unit: "rad"}
	clock := finding.Axis{Label: "time", Unit: "s"}
	period0 := finding.Normal("decay.period_zero", "arm", "Period of small swings", 1.06341, 1.2e-4, "s", "fit of the whole decay with friction and amplitude; the limit of small swings")
	period0.Budget = []finding.Share{{Source: "pictures", U: 1.05e-4}, {Source: "the phone's clock", U: 5.3e-5}, {Source: "vertical", U: 2e-6}}
	zeta := finding.Normal("decay.zeta", "arm", "Damping ratio at 20°", 0.005641, 4.1e-5, "1", "equivalent viscous damping of the weighed laws at the stated amplitude")
	zeta.Budget = []finding.Share{{Source: "pictures", U: 3.9e-5}, {Source: "choice of law", U: 1.2e-5}}
	zeta.Cautions = []string{"The swing ended before the law could be decided for certain."}
	return &record.Record{
		Run: record.Run{
			Version: "v0.1-test", Started: time.Date(2026, 5, 4, 8, 30, 0, 0, time.UTC),
			Rig:     record.Rig{Name: "Lantern 07", File: "lantern.toml", Text: "name = \"Lantern 07\"\n\n[scale]\nlength_mm = 100.0       # between the two marks\nu_length_mm = 0.2\nends_px = [[675.6, 133.6], [677.9, 243.8]]\n"},
			Clip:    &record.Clip{File: "lantern-07.mp4", SHA256: "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08", Bytes: 44040192, Facts: map[string]any{"codec": "h264", "true_rate_per_s": 59.94, "width_px": 720.0}},
			Options: map[string]string{"rig": "lantern.toml"}, Durations: []record.Duration{{Step: "tracking", Seconds: 3.2}, {Step: "analysis", Seconds: 0.81}},
		},
		Headline: "The arm swings once every 1.0634 s (± 0.0001 s). Left alone it loses 3.5 % of its amplitude with each swing; the damping ratio is 0.00564 (± 0.00004) at 20°, mostly viscous friction.",
		Cautions: []string{"The clip's times jitter by 1.2 ms from frame to frame; the container's own times were used.", "The bob was hidden for 0.7 s."},
		Safety:   []string{"Strong magnets must not be swallowed and must be kept from small children and from people with medical implants such as pacemakers and defibrillators; they pinch and shatter."},
		Track:    tr, Angles: []record.Angles{a}, Still: still(),
		Findings: []finding.Finding{
			period0, zeta,
			{Key: "decay.drag", Subject: "arm", Name: "Air drag", Kind: finding.UpperLimit, Hi: 0.00123, Unit: "1/rad", Method: "none was seen; the largest that the swing allows"},
			{Key: "decay.gravity", Subject: "arm", Name: "Gravity check", Kind: finding.Statement, Text: "The length and the period agree with gravity: 9.79 ± 0.05 m/s² against 9.81 m/s².", Method: "length from the track, period of small swings"},
			{Key: "x", Subject: "arm", Name: "Dry friction", Kind: finding.Undecided, Unit: "1", Text: "The swing is too short to tell dry from viscous friction; film until it is below 5°.", Method: "weighed laws"},
			finding.Normal("spectrum.frequency", "lamp", "Strongest frequency", 0.94038, 0.00021, "Hz", "spectral line refined by least squares"),
		},
		Fits: []finding.Fit{{
			Key: "decay", Subject: "arm", ChiSquare: 1180, DegreesOf: 1154, Converged: true, Why: "The step became too small to matter.",
			Free:         []finding.Parameter{{Name: "ω₀²", Value: 34.91, U: 0.008, Unit: "1/s²"}, {Name: "viscous friction", Value: 0.0667, U: 0.0005, Unit: "1/s"}},
			Held:         []finding.Parameter{{Name: "dry friction", Value: 0, U: 0, Unit: "1/s²"}},
			NotSeparable: []string{"viscous friction and air drag: only their sum at 20° is known"},
			Candidates:   []finding.Candidate{{Name: "viscous", BIC: 1301.2, Weight: 0.03}, {Name: "viscous and drag", BIC: 1294.1, Weight: 0.96999}, {Name: "dry", BIC: 4294, Weight: 0}},
		}},
		Curves: []finding.Curve{
			{Key: "decay-fit", Subject: "arm", Title: "How the swing dies", Caption: "Measured angle and the fitted swing; below, their difference, which scatters by 0.011° as the pictures let expect.", X: clock, Y: angle, Lines: []finding.Line{data, fit}},
			{Key: "decay-residuals", Subject: "arm", Title: "Residual", X: clock, Y: finding.Axis{Label: "difference", Unit: "rad", ShowUnit: "°", ShowFactor: deg}, Lines: []finding.Line{res}},
			{Key: "decay-envelope", Subject: "arm", Title: "Amplitude at each turning point", Caption: "Bars and band: 95 %.", X: clock, Y: finding.Axis{Label: "amplitude", Unit: "rad"}, Lines: []finding.Line{env, law, alt}},
			{Key: "phase", Subject: "arm", Title: "Phase portrait", Caption: "Angle against angular speed.", X: angle, Y: finding.Axis{Label: "angular speed", Unit: "rad/s"}, Lines: []finding.Line{phase}},
			{Key: "spectrum", Subject: "arm", Title: "Spectrum", Caption: "Power at each frequency. The peak is the swing.", X: finding.Axis{Label: "frequency", Unit: "Hz"}, Y: finding.Axis{Label: "power", Unit: "rad²/Hz", Log: true}, Lines: []finding.Line{spec, {Name: "noise", Role: finding.Guide, X: []float64{0, 30}, Y: []float64{1.2e-7, 1.2e-7}}}},
		},
	}
}

// still is a picture with a lamp on an arm.
func still() []byte {
	img := image.NewRGBA(image.Rect(0, 0, 720, 480))
	for y := range 480 {
		for x := range 720 {
			g := uint8(170 + 20*math.Sin(float64(x)/40) + 10*math.Cos(float64(y)/25))
			c := color.RGBA{g, g, g - 20, 255}
			if y > 440 {
				c = color.RGBA{90, 60, 40, 255}
			}
			if d := math.Hypot(float64(x)-545, float64(y)-310); d < 20 {
				c = color.RGBA{184, 38, 31, 255}
			}
			if math.Abs((float64(x)-360)*230-(float64(y)-80)*185) < 700 && y > 80 && y < 310 {
				c = color.RGBA{40, 40, 40, 255}
			}
			img.Set(x, y, c)
		}
	}
	var b bytes.Buffer
	if err := png.Encode(&b, img); err != nil {
		panic(err)
	}
	return b.Bytes()
}
