package main

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"testing"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/network"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/cmd/internal/demo"
)

// shots is where to leave pictures of the sheet for people to look at.
var shots = flag.String("shots", "", "folder for screenshots of the field sheet")

// browser starts a headless Chromium, which `make setup` installs.
func browser(t *testing.T) context.Context {
	t.Helper()
	options := []chromedp.ExecAllocatorOption{
		chromedp.NoFirstRun, chromedp.NoDefaultBrowserCheck, chromedp.Headless, chromedp.NoSandbox, chromedp.DisableGPU,
		chromedp.Flag("disable-background-networking", true), chromedp.Flag("disable-component-update", true),
		chromedp.Flag("disable-sync", true), chromedp.Flag("hide-scrollbars", true), chromedp.UserDataDir(t.TempDir()),
		chromedp.Flag("disable-dev-shm-usage", true),
	}
	allocator, stop := chromedp.NewExecAllocator(t.Context(), options...)
	t.Cleanup(stop)
	ctx, done := chromedp.NewContext(allocator)
	t.Cleanup(done)
	require.NoError(t, chromedp.Do(ctx), "chromium cannot be started; make setup installs it")
	return ctx
}

// heard is what a page says and asks for while it is shown.
type heard struct {
	mu    sync.Mutex
	lines []string
	asked []string
}

func (h *heard) listen(t *testing.T, ctx context.Context) {
	t.Helper()
	require.NoError(t, chromedp.Listen(ctx, func(event any) {
		h.mu.Lock()
		defer h.mu.Unlock()
		switch e := event.(type) {
		case *runtime.EventConsoleAPICalled:
			h.lines = append(h.lines, "console: "+string(e.Type))
		case *runtime.EventExceptionThrown:
			h.lines = append(h.lines, "exception: "+e.ExceptionDetails.Text)
		case *log.EventEntryAdded:
			h.lines = append(h.lines, "log: "+e.Entry.Text)
		case *network.EventRequestWillBeSent:
			if !strings.HasPrefix(e.Request.URL, "data:") {
				h.asked = append(h.asked, e.Request.URL)
			}
		}
	}))
}

// screen is a way to show the sheet.
type screen struct {
	name          string
	width, height int64
	phone, dark   bool
	media         string // print, or empty for a screen
}

// A4 is 210 mm wide, less two margins of 13 mm: at the 96 pixels an inch of
// CSS, 184 mm are 695.4 pixels.
const pageWidth = 695

var screens = []screen{
	{"desktop", 1200, 900, false, false, ""},
	{"desktop-dark", 1200, 900, false, true, ""},
	{"phone", 390, 844, true, false, ""},
	{"phone-dark", 390, 844, true, true, ""},
	{"a4", pageWidth, 1000, false, false, "print"},
	{"narrow", 320, 640, true, false, ""},
}

// show opens the sheet in this way, and returns what a script finds there.
func show[T any](t *testing.T, ctx context.Context, s screen, path, script string) T {
	t.Helper()
	scheme, scale := "light", 1.0
	if s.dark {
		scheme = "dark"
	}
	if s.phone {
		scale = 2
	}
	_, err := chromedp.Call(ctx, network.Enable, network.EnableParams{})
	require.NoError(t, err)
	_, err = chromedp.Call(ctx, emulation.SetDeviceMetricsOverride, emulation.SetDeviceMetricsOverrideParams{
		Width: s.width, Height: s.height, DeviceScaleFactor: scale, Mobile: s.phone})
	require.NoError(t, err)
	_, err = chromedp.Call(ctx, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{
		Media: s.media, Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}}})
	require.NoError(t, err)
	require.NoError(t, chromedp.Do(ctx, chromedp.Navigate("file://"+path)))
	return ask[T](t, ctx, script)
}

// ask returns what a script finds on the page that is shown.
func ask[T any](t *testing.T, ctx context.Context, script string) T {
	t.Helper()
	found, err := chromedp.Run(ctx, chromedp.Evaluate[T](script))
	require.NoError(t, err)
	return found
}

// widths is what a page tells of its size.
type widths struct {
	Scroll, Client float64
	Out            []string // elements that reach beyond the screen
}

// measure finds elements beyond the right or left edge, those that are
// visually hidden on purpose left out.
const measure = `(() => {
	const d = document.documentElement, out = [];
	for (const e of document.body.querySelectorAll('*')) {
		if (e.closest('svg') && e.tagName.toLowerCase() !== 'svg') continue;
		const b = e.getBoundingClientRect();
		if (b.width <= 1 || e.closest('.skip, .hidden, thead')) continue;
		if (b.right > d.clientWidth + 0.5 || b.left < -0.5) out.push(e.tagName + '.' + e.getAttribute('class') + ' ' + b.left + ' to ' + b.right);
	}
	return {Scroll: d.scrollWidth, Client: d.clientWidth, Out: out.slice(0, 5)};
})()`

// makeSheet runs the command on the demo's valley with awkward names, and
// returns the path of the sheet and the JSON of the same run.
func makeSheet(t *testing.T) (string, []map[string]any) {
	t.Helper()
	dir := t.TempDir()
	valley, err := demo.New(demo.Seed)
	require.NoError(t, err)
	require.NoError(t, writeValley(valley, dir))
	looks := filepath.Join(dir, demoLooks)
	require.NoError(t, os.WriteFile(looks, []byte(demo.Looks), 0o600))
	awkward := strings.NewReplacer(
		`"Pravell"`, `"<script>alert(1)</script> & \"Pravell\" 'quoted'"`,
		`"Tovary Pass"`, `"`+strings.Repeat("Tovarypassover", 12)+`"`,
		`"Isvarn Glacier"`, `"Isvärn ﬁrn 氷河 🏔"`).Replace(valley.GeoJSON())
	// An area, and a site off the map.
	awkward = strings.Replace(awkward, `"features": [`, `"features": [
		{"type":"Feature","properties":{"name":"Field"},"geometry":{"type":"Polygon","coordinates":[[[-40.11,47.0],[-40.105,47.0],[-40.105,47.004],[-40.11,47.0]]]}},
		{"type":"Feature","properties":{"name":"Far away"},"geometry":{"type":"Point","coordinates":[10,47]}},`, 1)
	sites := filepath.Join(dir, "sites.geojson")
	require.NoError(t, os.WriteFile(sites, []byte(awkward), 0o600))
	sheet := filepath.Join(dir, "sheet.html")
	got := call(t.Context(), "sites", filepath.Join(dir, demoDEM), "--sites", sites, "--looks", looks,
		"--look", "name=x,incidence=45,azimuth=30,frequency_ghz=9.6,bandwidth_mhz=150,slant_range_km=8", "--look", "name=a-name-that-is-as-long-as-names-get-in-plans,incidence=29,azimuth=260",
		"--dem-sigma", "3", "--dem-correlation", "150", "--reflector-legs", "0.5,1", "--clutter=-12", "--azimuth-resolution", "2", "--reflector-error", "0.2",
		"--sheet", sheet, "--json")
	require.Equal(t, exitInput, got.code, got.errOut) // one site is far away, the others stand
	var rows []map[string]any
	require.NoError(t, json.Unmarshal([]byte(got.out), &rows))
	require.Len(t, rows, 7*5)
	return sheet, rows
}

// TestSheet shows the sheet in a browser: it says nothing on the console, asks
// for nothing, holds the values of the JSON, and fits a phone, a desk and A4.
func TestSheet(t *testing.T) {
	path, rows := makeSheet(t)
	ctx := browser(t)
	h := &heard{}
	h.listen(t, ctx)
	for _, s := range screens {
		t.Run(s.name, func(t *testing.T) {
			w := show[widths](t, ctx, s, path, measure)
			assert.LessOrEqual(t, w.Scroll, w.Client, "scrolls sideways")
			assert.LessOrEqual(t, w.Client, float64(s.width))
			assert.Empty(t, w.Out, "reaches beyond the screen")
			checkContrast(t, ctx)
			shoot(t, ctx, s.name)
		})
	}
	t.Run("values", func(t *testing.T) { checkValues(t, ctx, rows) })
	t.Run("markup", func(t *testing.T) { checkMarkup(t, ctx, rows) })
	t.Run("paper", func(t *testing.T) { checkPaper(t, ctx) })
	t.Run("keyboard", func(t *testing.T) { checkKeyboard(t, ctx, path) })
	h.mu.Lock()
	defer h.mu.Unlock()
	assert.Empty(t, h.lines)
	for _, url := range h.asked {
		assert.Equal(t, "file://"+path, url, "the page asks for something beside itself")
	}
}

// shoot leaves a picture of the whole page, when asked for.
func shoot(t *testing.T, ctx context.Context, name string) {
	t.Helper()
	if *shots == "" {
		return
	}
	picture, err := chromedp.Run(ctx, chromedp.FullScreenshot(100))
	require.NoError(t, err)
	require.NoError(t, os.MkdirAll(*shots, 0o777))
	require.NoError(t, os.WriteFile(filepath.Join(*shots, name+".png"), picture, 0o666))
}

// shown is a value on the page.
type shown struct{ Site, Look, Key, Text string }

// checkValues compares every number, class and reason of the page with the
// JSON of the run.
func checkValues(t *testing.T, ctx context.Context, rows []map[string]any) {
	values := ask[[]shown](t, ctx,
		`[...document.querySelectorAll('[data-key][data-look]')].map(e => ({Site: e.dataset.site, Look: e.dataset.look, Key: e.dataset.key, Text: e.textContent}))`)
	find := func(site, look string) map[string]any {
		for _, r := range rows {
			if r["site"] == site && r["look"] == look {
				return r
			}
		}
		t.Fatalf("no row of site %q and look %q", site, look)
		return nil
	}
	seen := map[string]int{}
	for _, v := range values {
		row := find(v.Site, v.Look)
		want, ok := row[v.Key]
		require.True(t, ok, v.Key)
		seen[v.Key]++
		switch w := want.(type) {
		case nil:
			assert.Equal(t, "–", v.Text, "%+v", v)
		case float64:
			got, err := strconv.ParseFloat(v.Text, 64)
			require.NoError(t, err, "%+v", v)
			assert.Equal(t, w, got, "%+v", v)
		default:
			assert.Equal(t, w, v.Text, "%+v", v)
		}
	}
	judged := len(rows) - 5 // the site far away has no numbers
	for _, key := range []string{"code", "reason", "blocker_distance", "slant_range", "leg_wanted", "section_dbsm_leg_0_5"} {
		assert.Equal(t, judged, seen[key], key)
	}
	for _, key := range []string{"clearance", "fold_margin", "p_open", "to_radar", "incidence", "local_incidence"} {
		assert.Equal(t, 2*judged, seen[key], "%s stands in two tables", key)
	}
	verdicts := ask[[]shown](t, ctx,
		`[...document.querySelectorAll('td[data-verdict]')].map(e => ({Site: e.dataset.site, Look: e.dataset.look, Key: e.dataset.verdict, Text: e.querySelector('.chip').textContent}))`)
	require.Len(t, verdicts, len(rows))
	for _, v := range verdicts {
		assert.Equal(t, find(v.Site, v.Look)["verdict"], v.Key)
		assert.Contains(t, v.Text, v.Key)
	}
}

// outline is how the page is built.
type outline struct {
	Scripts, Images, Pictures, Wordless, Tables, Captions, Charts int
	Levels                                                        []int
	Heads                                                         []string
	Lang, Title                                                   string
}

// checkMarkup: names are text, wherever they stand; every picture has words,
// every table a caption, every heading its level.
func checkMarkup(t *testing.T, ctx context.Context, rows []map[string]any) {
	page := ask[outline](t, ctx, `(() => {
		const all = s => [...document.querySelectorAll(s)];
		const pictures = all('svg[role=img]');
		return {
			Scripts: all('script, iframe, object, link[rel=stylesheet]').length,
			Images: all('image').filter(e => !e.getAttribute('href').startsWith('data:image/png;base64,')).length,
			Pictures: pictures.length, Wordless: pictures.filter(e => (e.getAttribute('aria-label') || '').length < 20).length,
			Tables: all('table').length, Captions: all('table > caption').length, Charts: all('svg.sky').length,
			Levels: all('h1, h2, h3, h4').map(e => +e.tagName[1]), Heads: all('article h3 .name').map(e => e.textContent),
			Lang: document.documentElement.lang, Title: document.title,
		};
	})()`)
	assert.Zero(t, page.Scripts)
	assert.Zero(t, page.Images)
	assert.Positive(t, page.Pictures)
	assert.Zero(t, page.Wordless)
	assert.Equal(t, page.Tables, page.Captions)
	assert.Equal(t, 6, page.Charts, "a sky for every judged site")
	assert.Equal(t, "en", page.Lang)
	assert.NotEmpty(t, page.Title)
	for i := 1; i < len(page.Levels); i++ {
		assert.LessOrEqual(t, page.Levels[i], page.Levels[i-1]+1, "heading %d skips a level", i)
	}
	var names []string
	for i := 0; i < len(rows); i += 5 {
		names = append(names, rows[i]["site"].(string))
	}
	assert.Equal(t, names, page.Heads)
	assert.Contains(t, names, `<script>alert(1)</script> & "Pravell" 'quoted'`)
}

// checkPaper prints the sheet: A4, and no more pages than sites and a few.
func checkPaper(t *testing.T, ctx context.Context) {
	pdf, err := chromedp.Run(ctx, chromedp.PrintToPDF(chromedp.PDFPreferCSSPageSize(), chromedp.PDFPrintBackground()))
	require.NoError(t, err)
	// ISO 216: A4 is 210 mm x 297 mm, 595.28 x 841.89 points of 1/72 inch.
	// Browsers round to whole pixels of 1/96 inch, 0.75 points.
	boxes := 0
	for _, part := range strings.Split(string(pdf), "/MediaBox")[1:] {
		var x0, y0, x1, y1 float64
		_, err := fmt.Sscanf(strings.NewReplacer("[", " ", "]", " ").Replace(part[:40]), "%f %f %f %f", &x0, &y0, &x1, &y1)
		require.NoError(t, err)
		assert.InDelta(t, 595.28, x1-x0, 1)
		assert.InDelta(t, 841.89, y1-y0, 1)
		boxes++
	}
	assert.GreaterOrEqual(t, boxes, 3)
	assert.LessOrEqual(t, boxes, 14)
	if *shots != "" {
		require.NoError(t, os.WriteFile(filepath.Join(*shots, "sheet.pdf"), pdf, 0o666))
	}
}

// inks are the colours of a text and of what it lies on.
type inks struct{ Text, Front, Back string }

// checkContrast: text stands out from what it lies on as WCAG 2.2 wants for
// small text, 4.5 to 1.
func checkContrast(t *testing.T, ctx context.Context) {
	pairs := ask[[]inks](t, ctx, `(() => {
		const out = [], seen = new Set();
		for (const e of document.querySelectorAll('body *:not(svg *)')) {
			if (![...e.childNodes].some(n => n.nodeType === 3 && n.textContent.trim())) continue;
			let b = e, back = 'rgba(0, 0, 0, 0)';
			while (b && back === 'rgba(0, 0, 0, 0)') { back = getComputedStyle(b).backgroundColor; b = b.parentElement; }
			const front = getComputedStyle(e).color, key = front + back;
			if (!seen.has(key)) { seen.add(key); out.push({Text: e.textContent.trim().slice(0, 30), Front: front, Back: back}); }
		}
		return out;
	})()`)
	require.Greater(t, len(pairs), 4)
	for _, p := range pairs {
		assert.GreaterOrEqual(t, contrast(t, p.Front, p.Back), 4.5, "%q, %s on %s", p.Text, p.Front, p.Back)
	}
}

// contrast is the ratio of the relative luminances of two colours, WCAG 2.2,
// "contrast ratio" and "relative luminance".
func contrast(t *testing.T, a, b string) float64 {
	t.Helper()
	luminance := func(s string) float64 {
		var c [3]float64
		_, err := fmt.Sscanf(s, "rgb(%f, %f, %f)", &c[0], &c[1], &c[2])
		require.NoError(t, err, s)
		sum := 0.0
		for i, weight := range []float64{0.2126, 0.7152, 0.0722} {
			v := c[i] / 255
			if v <= 0.04045 {
				v /= 12.92
			} else {
				v = math.Pow((v+0.055)/1.055, 2.4)
			}
			sum += weight * v
		}
		return sum
	}
	l, d := luminance(a), luminance(b)
	return (max(l, d) + 0.05) / (min(l, d) + 0.05)
}

// focus is the element that has it.
type focus struct{ ID, Tag, Text string }

// checkKeyboard: the tab key reaches every link and every fold of the page,
// the way past the head first, and enter opens a fold.
func checkKeyboard(t *testing.T, ctx context.Context, path string) {
	want := show[int](t, ctx, screens[0], path, `document.querySelectorAll('a[href], summary').length`)
	var first string
	reached, opened := map[string]bool{}, false
	for range want + 2 {
		require.NoError(t, chromedp.Do(ctx, chromedp.KeyEvent("\t")))
		at := ask[focus](t, ctx, `(() => {
			const e = document.activeElement; const all = [...document.querySelectorAll('a[href], summary')];
			return {ID: '' + all.indexOf(e), Tag: e.tagName, Text: e.textContent.trim()};
		})()`)
		if first == "" {
			first = at.Text
		}
		if at.Tag == "SUMMARY" && !opened {
			require.NoError(t, chromedp.Do(ctx, chromedp.KeyEvent("\r")))
			opened = ask[bool](t, ctx, `document.activeElement.parentElement.open`)
			assert.True(t, opened, "enter opens a fold")
		}
		reached[at.ID] = true
	}
	delete(reached, "-1")
	assert.Equal(t, "Skip to the results", first)
	assert.Len(t, reached, want)
	assert.True(t, opened)
}
