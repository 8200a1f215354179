package track

import (
	"bytes"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
)

// same makes NaN equal to NaN, so that tracks can be compared whole.
func same(a, b *Track) bool {
	clean := func(t *Track) *Track {
		c := *t
		c.Bobs = nil
		c.BrokeAt = 0
		for _, b := range t.Bobs {
			samples := append([]Sample(nil), b.Samples...)
			for i := range samples {
				v := reflect.ValueOf(&samples[i]).Elem()
				unNaN(v)
			}
			c.Bobs = append(c.Bobs, Bob{Name: b.Name, Samples: samples})
		}
		return &c
	}
	return reflect.DeepEqual(clean(a), clean(b))
}

func unNaN(v reflect.Value) {
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			unNaN(v.Field(i))
		}
	case reflect.Float64:
		if math.IsNaN(v.Float()) {
			v.SetFloat(-12345.678)
		}
	}
}

func TestATableReadsBackExactly(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 1))
	nan := math.NaN()
	tr := &Track{BrokeAt: nan, Bobs: []Bob{{Name: "lamp, \"red\""}, {Name: "Größe\nzwei"}}}
	for k := range 400 {
		for i := range tr.Bobs {
			s := Sample{Frame: k, T: float64(k)/59.94 + 1e-4*rng.Float64() + float64(i)*1e-5}
			s.State = State(rng.IntN(4))
			if s.State == Missing {
				s.X, s.Z, s.U, s.V = nan, nan, nan, nan
				s.Plane, s.Pixel = Cov{nan, nan, nan}, Cov{nan, nan, nan}
			} else {
				s.X, s.Z, s.U, s.V = rng.NormFloat64(), rng.NormFloat64()*1e-300, rng.Float64()*1e3, -rng.Float64()
				s.Plane = Cov{rng.Float64() * 1e-9, rng.NormFloat64() * 1e-12, rng.Float64() * 1e-9}
				s.Pixel = Cov{rng.Float64(), rng.NormFloat64(), rng.Float64()}
			}
			tr.Bobs[i].Samples = append(tr.Bobs[i].Samples, s)
		}
	}
	var b bytes.Buffer
	if err := WriteTable(&b, tr); err != nil {
		t.Fatal(err)
	}
	back, err := ReadTable(bytes.NewReader(b.Bytes()), "track.csv")
	if err != nil {
		t.Fatal(err)
	}
	if !same(tr, back) {
		t.Error("the track that came back is not the one that was written")
	}
	var again bytes.Buffer
	if err := WriteTable(&again, back); err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(b.Bytes(), again.Bytes()) {
		t.Error("written twice, the table differs")
	}
}

func TestAPlainTableIsEnough(t *testing.T) {
	tr, err := ReadTable(strings.NewReader("z_m,t_s,x_m\n-0.28,0,0.01\n,0.1,\n-0.27,0.2,0.02\n"), "hand.csv")
	if err != nil {
		t.Fatal(err)
	}
	s := tr.Bobs[0].Samples
	if len(tr.Bobs) != 1 || len(s) != 3 || s[0].X != 0.01 || s[0].State != Seen || s[1].State != Missing || s[2].Frame != 2 {
		t.Errorf("read as %+v", tr.Bobs)
	}
	if !math.IsNaN(s[0].Plane.AA) {
		t.Error("an uncertainty that nobody gave is known")
	}
}

func TestThePlainUncertaintyHoldsWhereTheTwoDisagree(t *testing.T) {
	tr, err := ReadTable(strings.NewReader("t_s,x_m,z_m,u_x_m,u_z_m,cov_xx_m2,cov_xz_m2,cov_zz_m2\n0,1,1,0.002,0.001,1e-6,0,1e-6\n"), "t.csv")
	if err != nil {
		t.Fatal(err)
	}
	if c := tr.Bobs[0].Samples[0].Plane; math.Abs(c.AA-4e-6) > 1e-18 || c.BB != 1e-6 {
		t.Errorf("covariance %+v", c)
	}
}

func TestABadTableIsRefusedInPlainWords(t *testing.T) {
	for text, want := range map[string]string{
		"":                                              "t.csv is empty",
		"t_s,x_m\n0,1\n":                                "has no column z_m",
		"t_s,x_m,z_m\n":                                 "no rows",
		"t_s,x_m,z_m\n0,one,1\n":                        `line 2: x_m is "one"`,
		"t_s,x_m,z_m\n,1,1\n":                           "line 2: t_s is empty",
		"t_s,x_m,z_m\n0,1\n":                            "line 2",
		"t_s,x_m,z_m\n1,1,1\n0,1,1\n":                   "do not rise",
		"t_s,x_m,z_m\n1,1,1\n1,1,1\n":                   "two rows at 1 s",
		"t_s,t_s,x_m,z_m\n1,1,1,1\n":                    `two columns "t_s"`,
		"t_s,x_m,z_m,state\n1,1,1,perhaps\n":            `state is "perhaps"`,
		"t_s,x_m,z_m,state\n1,,1,seen\n":                "the bob is seen but",
		"t_s,x_m,z_m\n0,\"1,1\n":                        "line",
		"\x00\x01\x02\xff":                              "has no column t_s",
		"t_s,x_m,z_m\nNaN,1,1\n":                        "t_s is empty",
		"t_s,x_m,z_m,bob\n0,1,1,a\n0,1,1,b\n-1,1,1,b\n": `bob "b" do not rise`,
	} {
		_, err := ReadTable(strings.NewReader(text), "t.csv")
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: error %v, want one with %q", text, err, want)
		}
	}
}

func FuzzReadTable(f *testing.F) {
	f.Add("t_s,x_m,z_m\n0,1,1\n")
	f.Add("t_s,bob,x_m,z_m,state,frame\n0,a,1,1,seen,3\n1,a,,,missing,4\n")
	f.Fuzz(func(t *testing.T, text string) {
		tr, err := ReadTable(strings.NewReader(text), "t.csv")
		if err == nil && len(tr.Bobs) == 0 {
			t.Error("a track without bobs, and no error")
		}
	})
}
