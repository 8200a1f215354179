package plots

import (
	"context"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// browser gives a context in which chromedp drives a real Chromium without
// network; the test is skipped where there is none.
func browser(t *testing.T) context.Context {
	t.Helper()
	path := ""
	for _, name := range []string{"chromium", "chromium-browser", "google-chrome"} {
		if p, err := exec.LookPath(name); err == nil {
			path = p
			break
		}
	}
	if path == "" {
		t.Skip("no Chromium here: the pages are not looked at (on Debian: apt install chromium)")
	}
	ctx, cancel := context.WithTimeout(t.Context(), 3*time.Minute) // long on a busy machine; a few seconds on an idle one
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewExecAllocator(ctx,
		chromedp.ExecPath(path), chromedp.Headless, chromedp.NoSandbox, chromedp.DisableGPU, chromedp.NoFirstRun,
		chromedp.Flag("disable-background-networking", true), chromedp.Flag("host-resolver-rules", "MAP * ~NOTFOUND"))
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewContext(ctx)
	t.Cleanup(cancel)
	return ctx
}

func fileURL(path string) string { return (&url.URL{Scheme: "file", Path: path}).String() }

// look opens a page at a width and returns a picture of all of it.
func shoot(t *testing.T, ctx context.Context, path string, width int64) (scrollWidth float64, picture []byte) {
	t.Helper()
	err := chromedp.Do(ctx, chromedp.EmulateViewport(width, 800), chromedp.Navigate(fileURL(path)))
	if err != nil {
		t.Fatal(err)
	}
	scrollWidth, err = chromedp.Run(ctx, chromedp.Evaluate[float64](`document.documentElement.scrollWidth`))
	if err != nil {
		t.Fatal(err)
	}
	picture, err = chromedp.Run(ctx, chromedp.FullScreenshot(100))
	if err != nil {
		t.Fatal(err)
	}
	return scrollWidth, picture
}

func TestTheReportOnAPhoneADeskAndPaper(t *testing.T) {
	ctx := browser(t)
	r := swing()
	if err := Draw(t.Context(), r); err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	if *keep != "" {
		dir = *keep
	}
	path := filepath.Join(dir, "report.html")
	if err := os.WriteFile(path, r.Report, 0o644); err != nil {
		t.Fatal(err)
	}
	for _, width := range []int64{360, 768, 1280} {
		wide, picture := shoot(t, ctx, path, width)
		if wide > float64(width) {
			t.Errorf("at a width of %d px the page is %v px wide and must be pushed sideways", width, wide)
		}
		if *keep != "" {
			os.WriteFile(filepath.Join(dir, "at-"+strings.Repeat("x", int(width/360))+".png"), picture, 0o644)
		}
	}
	text, err := chromedp.Run(ctx, chromedp.Evaluate[string](`document.body.innerText`))
	if err != nil {
		t.Fatal(err)
	}
	text = strings.ReplaceAll(text, "\u00a0", " ")
	for _, want := range []string{
		r.Headline, r.Cautions[0], r.Safety[0], "1.06341 ± 0.00012 s", "1.06317 to 1.06365 s", "0.005641 ± 0.000041", "below 0.0013",
		"Not determined. The swing is too short", "Figure 1.", "lantern-07.mp4", r.Run.Clip.SHA256, "viscous and drag", "97 %", "the phone's clock", "length_mm = 100.0",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("the page does not show %q", want)
		}
	}
	for name, size := range map[string]chromedp.PaperSize{"a4": chromedp.PaperA4, "letter": chromedp.PaperLetter} {
		pdf, err := chromedp.Run(ctx, chromedp.PrintToPDF(chromedp.PDFPaper(size), chromedp.PDFMargin(0.55)))
		if err != nil {
			t.Fatal(err)
		}
		pages := strings.Count(string(pdf), "/Type /Page\n") + strings.Count(string(pdf), "/Type /Page ")
		if pages < 2 || pages > 6 {
			t.Errorf("printed on %s the report takes %d pages", name, pages)
		}
		if *keep != "" {
			os.WriteFile(filepath.Join(dir, name+".pdf"), pdf, 0o644)
		}
	}
}
