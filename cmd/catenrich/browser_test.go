package main

import (
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	cdplog "github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
)

// TestReportInBrowser looks at reports as a reader does: in a browser, on a
// telephone, a tablet and a desk, in both colour schemes, and on paper. It is
// skipped where no browser is installed; in continuous integration that is a
// failure. Screenshots stay in $REPORT_SHOTS, if that is set.
func TestReportInBrowser(t *testing.T) {
	if testing.Short() {
		t.Skip("takes a browser and most of a minute")
	}
	browser, err := exec.LookPath("chromium")
	if err != nil {
		if os.Getenv("CI") == "true" {
			t.Fatal("no chromium, and CI must look at the report: apt-get install chromium")
		}
		t.Skip("no chromium is installed (Debian: apt-get install chromium): the report is not looked at in a browser")
	}
	axe := axeSource(t)
	pages := reportPages(t)
	shots := os.Getenv("REPORT_SHOTS")
	if shots == "" {
		shots = t.TempDir()
	}
	ctx := startBrowser(t, browser)
	for name, file := range pages {
		t.Run(name, func(t *testing.T) {
			for _, scheme := range []string{"light", "dark"} {
				for _, width := range []int64{360, 768, 1280} {
					lookAt(t, ctx, file, scheme, width, axe, filepath.Join(shots, fmt.Sprintf("%s-%s-%d.png", name, scheme, width)))
				}
			}
			printed(t, ctx, file)
		})
	}
}

// startBrowser starts one browser for all pages, with an empty profile.
func startBrowser(t *testing.T, path string) context.Context {
	options := append(chromedp.DefaultExecAllocatorOptions[:],
		chromedp.ExecPath(path), chromedp.NoSandbox, chromedp.DisableGPU, chromedp.UserDataDir(t.TempDir()),
		chromedp.Flag("disable-quic", true), chromedp.Flag("disable-component-update", true),
		chromedp.Flag("disable-background-networking", true), chromedp.Flag("disable-sync", true))
	allocated, stop := chromedp.NewExecAllocator(context.Background(), options...)
	t.Cleanup(stop)
	ctx, done := chromedp.NewContext(allocated)
	t.Cleanup(done)
	if err := chromedp.Do(ctx, chromedp.Navigate("about:blank")); err != nil {
		t.Fatalf("starting %s: %v", path, err)
	}
	return ctx
}

// lookAt opens a page in one width and scheme: nothing on the console, nothing
// beyond its width, no label cut off, contrast of WCAG AA.
func lookAt(t *testing.T, parent context.Context, file, scheme string, width int64, axe, shot string) {
	t.Helper()
	ctx, done := chromedp.NewContext(parent)
	defer done()
	ctx, stop := context.WithTimeout(ctx, time.Minute)
	defer stop()
	complaints := listen(t, ctx)
	media := emulation.SetEmulatedMediaParams{Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}}}
	if _, err := chromedp.Call(ctx, emulation.SetEmulatedMedia, media); err != nil {
		t.Fatal(err)
	}
	if err := chromedp.Do(ctx, chromedp.EmulateViewport(width, 900), chromedp.Navigate("file://"+file)); err != nil {
		t.Fatalf("%s, %d px: %v", scheme, width, err)
	}
	found := map[string][]string{}
	for what, script := range map[string]string{
		"the page scrolls sideways": scrollScript, "elements reach beyond the page": beyondScript,
		"labels are cut off": cutScript, "contrast below WCAG AA": contrastScript,
	} {
		found[what] = evaluate(t, ctx, script)
	}
	if axe != "" && width == 768 {
		if err := chromedp.Do(ctx, chromedp.Evaluate[chromedp.Void](axe)); err != nil {
			t.Fatalf("axe-core does not load: %v", err)
		}
		found["axe-core finds"] = evaluate(t, ctx, axeScript)
	}
	found["the console says"] = complaints()
	for what, list := range found {
		if len(list) > 0 {
			t.Errorf("%s, %d px: %s:\n  %s", scheme, width, what, strings.Join(list[:min(len(list), 12)], "\n  "))
		}
	}
	picture, err := chromedp.Run(ctx, chromedp.FullScreenshot(100))
	if err == nil {
		err = os.WriteFile(shot, picture, 0o666)
	}
	if err != nil {
		t.Error(err)
	}
}

// evaluate runs a script that gives a list of findings, or a promise of one.
func evaluate(t *testing.T, ctx context.Context, script string) []string {
	t.Helper()
	list, err := chromedp.Run(ctx, chromedp.Evaluate[[]string](script, chromedp.EvalAwaitPromise))
	if err != nil {
		t.Fatalf("%v in the script\n%s", err, script)
	}
	return list
}

// listen collects what the browser says of a page.
func listen(t *testing.T, ctx context.Context) func() []string {
	var mu sync.Mutex
	var list []string
	err := chromedp.Listen(ctx, func(event any) {
		mu.Lock()
		defer mu.Unlock()
		switch e := event.(type) {
		case *runtime.EventExceptionThrown:
			list = append(list, e.ExceptionDetails.Text)
		case *runtime.EventConsoleAPICalled:
			list = append(list, fmt.Sprintf("%s %v", e.Type, e.Args))
		case *cdplog.EventEntryAdded:
			list = append(list, e.Entry.Text)
		}
	})
	if err != nil {
		t.Fatal(err)
	}
	return func() []string {
		mu.Lock()
		defer mu.Unlock()
		return list
	}
}

// printed puts the page on A4, in few sheets.
func printed(t *testing.T, parent context.Context, file string) {
	t.Helper()
	ctx, done := chromedp.NewContext(parent)
	defer done()
	ctx, stop := context.WithTimeout(ctx, time.Minute)
	defer stop()
	if err := chromedp.Do(ctx, chromedp.Navigate("file://"+file)); err != nil {
		t.Fatal(err)
	}
	pdf, err := chromedp.Run(ctx, chromedp.PrintToPDF(chromedp.PDFPreferCSSPageSize()))
	if err != nil {
		t.Fatal(err)
	}
	sheets := regexp.MustCompile(`/Type\s*/Page\b`).FindAll(pdf, -1)
	box := regexp.MustCompile(`/MediaBox\s*\[0 0 59[45]\.?\d* 84[12]\.?\d*\]`).FindAll(pdf, -1)
	if len(sheets) < 1 || len(sheets) > 8 || len(box) != len(sheets) {
		t.Errorf("printed it takes %d sheets, of which %d are A4", len(sheets), len(box))
	}
}

const scrollScript = `(() => {
	const d = document.documentElement
	return d.scrollWidth > innerWidth ? [d.scrollWidth + " px of " + innerWidth] : []
})()`

// beyondScript finds what sticks out sideways, although nothing scrolls.
const beyondScript = `[...document.body.querySelectorAll("*")].filter(e => !e.closest("svg") || e.tagName == "svg").filter(e => {
	const r = e.getBoundingClientRect()
	return r.width > 0 && (r.right > innerWidth + 0.5 || r.left < -0.5)
}).map(e => e.tagName + "." + e.className + " " + e.textContent.slice(0, 40))`

// cutScript finds labels of charts that leave their picture.
const cutScript = `[...document.querySelectorAll("svg text")].filter(e => {
	const b = e.getBBox(), v = e.ownerSVGElement.viewBox.baseVal
	return b.x < v.x || b.y < v.y || b.x + b.width > v.x + v.width || b.y + b.height > v.y + v.height
}).map(e => e.textContent)`

// contrastScript computes, from the page's own styles, the contrast of every
// text to what is behind it (WCAG 2.1, definitions of relative luminance and
// contrast ratio; success criterion 1.4.3).
const contrastScript = `(() => {
	const parse = s => { const n = s.match(/[\d.]+/g).map(Number); return n.length < 4 ? [...n.slice(0, 3), 1] : n }
	const over = (top, below) => [0, 1, 2].map(i => top[i] * top[3] + below[i] * (1 - top[3])).concat(1)
	const light = c => c.slice(0, 3).map(v => v / 255).map(v => v <= 0.03928 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4)
		.reduce((sum, v, i) => sum + v * [0.2126, 0.7152, 0.0722][i], 0)
	const behind = e => {
		const layers = []
		for (; e; e = e.parentElement) { const c = parse(getComputedStyle(e).backgroundColor); if (c[3] > 0) layers.unshift(c) }
		return layers.reduce((below, c) => over(c, below), [255, 255, 255, 1])
	}
	const bad = new Set()
	const walk = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT)
	for (let n; n = walk.nextNode();) {
		const e = n.parentElement
		if (!n.data.trim() || e.closest("title, desc, style")) continue
		const s = getComputedStyle(e), back = behind(e)
		const ink = over(parse(e.closest("svg") ? s.fill : s.color), back)
		const [a, b] = [light(ink), light(back)].sort((x, y) => y - x)
		const size = parseFloat(s.fontSize), large = size >= 24 || size >= 18.66 && s.fontWeight >= 700
		const ratio = (a + 0.05) / (b + 0.05)
		if (ratio < (large ? 3 : 4.5)) bad.add(ratio.toFixed(2) + " " + e.tagName + "." + e.getAttribute("class") + " " + n.data.trim().slice(0, 30))
	}
	return [...bad]
})()`

const axeScript = `axe.run(document, {runOnly: ["wcag2a", "wcag2aa", "wcag21aa", "best-practice"]}).then(r => r.violations.flatMap(v => v.nodes.map(n => v.id + ": " + n.target + " " + n.failureSummary)))`

// axeSource is the script of axe-core, which checks a page for what stands in
// the way of people who do not see it or see it otherwise. It is fetched in
// continuous integration only, by the package manager's own client; without it
// contrastScript stands alone.
func axeSource(t *testing.T) string {
	if os.Getenv("CI") != "true" {
		return ""
	}
	dir := t.TempDir()
	pack := exec.Command("npm", "pack", "--silent", "axe-core@4.10.2")
	pack.Dir = dir
	if out, err := pack.CombinedOutput(); err != nil {
		t.Logf("axe-core cannot be had (%v: %s): contrast is computed from the page's styles alone", err, out)
		return ""
	}
	unpack := exec.Command("tar", "xzf", "axe-core-4.10.2.tgz", "package/axe.min.js")
	unpack.Dir = dir
	if out, err := unpack.CombinedOutput(); err != nil {
		t.Fatalf("unpacking axe-core: %v: %s", err, out)
	}
	return string(readFile(t, filepath.Join(dir, "package", "axe.min.js")))
}
