package mask

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"foldshade/geometry"
)

// The limits of the probability of being open: below the first a site counts
// as unusable, from the second on as usable, between them it is marginal.
// They are the words "extremely unlikely" and "extremely likely" of the
// Intergovernmental Panel on Climate Change: Mastrandrea et al., Guidance Note
// for Lead Authors of the IPCC Fifth Assessment Report on Consistent Treatment
// of Uncertainties, 2010 (from memory).
const (
	UnusableBelow = 0.05
	UsableFrom    = 0.95
)

// conclude fills the verdict and its reason.
func (w *sitesWorker) conclude(res *SiteResult) {
	res.Verdict = verdict(res, len(w.job.Sites[res.Site].Cells) > 0)
	res.Reason = w.reason(res)
}

// verdict follows the rules that stand beside the verdicts. With cells of its
// own a site is judged by them, its shares, and not by its place.
func verdict(res *SiteResult, byCells bool) Verdict {
	switch {
	case res.Seen != geometry.InView:
		return NotSeen
	case byCells:
		return shareVerdict(&res.Shares)
	case res.Where != OnGround || res.Class == NoData:
		return UndeterminedThere
	}
	v := shareVerdict(&res.Shares)
	if res.Class.Kind() != 1 && v == Usable { // the place itself counts, also beside its footprint
		v = Marginal
	}
	p := res.Chance.Open
	switch {
	case p != p:
	case p >= UnusableBelow && p < UsableFrom && v != UndeterminedThere:
		return Marginal
	case p < UnusableBelow && v == Usable || p >= UsableFrom && v == Unusable:
		return Marginal
	}
	return v
}

// shareVerdict judges the parts of a footprint.
func shareVerdict(s *Shares) Verdict {
	switch good := s[1] + s[2]; {
	case s[1] > 0.999999:
		return Usable
	case good > 0:
		return Marginal
	case s[3]+s[4] > 0:
		return Unusable
	}
	return UndeterminedThere
}

// reason says in one plain sentence why the verdict is what it is.
func (w *sitesWorker) reason(res *SiteResult) string {
	s := &w.job.Sites[res.Site]
	switch {
	case res.Seen != geometry.InView:
		return "Not seen: " + res.Seen.String() + "."
	case len(s.Cells) > 0:
		return "Its cells are " + res.Shares.text() + "."
	case res.Where == OutsideDEM:
		return "It lies outside the DEM, beyond the outermost cell centres."
	case res.Where == OnHole || res.Class == NoData:
		return "The DEM has no height there."
	}
	text := w.classReason(res)
	if s.Footprint > 0 && res.Shares[res.Class.Kind()] < 1 {
		text += "; its footprint is " + res.Shares.text()
	}
	if p := res.Chance.Open; p == p {
		text += fmt.Sprintf("; with the error of the heights it is open with a probability of %s", probability(p))
	}
	return text + "."
}

// classReason says why the place has its class.
func (w *sitesWorker) classReason(res *SiteResult) string {
	switch res.Class {
	case Open, Compressed:
		text := fmt.Sprintf("Lit with %s m of clearance and apart from other ground by %s m of slant range", metres(res.Clearance), metres(res.FoldMargin))
		if res.Class == Compressed {
			text += fmt.Sprintf(", but compressed to %.2f of level ground", res.Foreshortening)
		}
		return text
	case ActiveLayover:
		return fmt.Sprintf("Folded: the slope faces the radar and is steeper than the incidence by %.1f degrees", -res.RangeIncidence.Degrees())
	case LayoverFarther, LayoverNearer, LayoverBoth:
		text := fmt.Sprintf("Folded %s m deep with ground %s", metres(-res.FoldMargin), res.Partner.text())
		return text + w.help(res)
	case SelfShadow:
		return "Hidden: the slope falls away from the radar more steeply than its rays" + w.help(res)
	case CastShadow:
		return "Hidden by terrain " + res.Blocker.text() + w.help(res)
	}
	return "It depends on terrain that the DEM does not show"
}

// help says what a mast would do.
func (w *sitesWorker) help(res *SiteResult) string {
	switch {
	case res.MastToClear == res.MastToClear:
		return fmt.Sprintf("; a mast of %.1f m would clear it", math.Ceil(res.MastToClear*10)/10)
	case res.Class.Kind() == 4:
		return fmt.Sprintf("; a mast of %.1f m would see the radar but be folded", math.Ceil((w.job.Sites[res.Site].Height-res.Clearance+liftAbove)*10)/10)
	}
	return "; no mast helps"
}

// text describes terrain from its site.
func (t *Terrain) text() string {
	if !t.Found() {
		return "nearby"
	}
	where := "away from the radar"
	if t.Distance < 0 {
		where = "towards the radar"
	}
	return fmt.Sprintf("%s m %s, at a height of %s m", metres(math.Abs(t.Distance)), where, metres(t.Height))
}

// text lists the shares that are not nothing.
func (s *Shares) text() string {
	names := [6]string{"without data", "open", "compressed", "folded", "hidden", "undetermined"}
	var parts []string
	for k, x := range s {
		if x > 0 {
			parts = append(parts, fmt.Sprintf("%.0f %% %s", 100*x, names[k]))
		}
	}
	n := len(parts)
	if n < 2 {
		return strings.Join(parts, "")
	}
	return strings.Join(parts[:n-1], ", ") + " and " + parts[n-1]
}

// metres prints a length: whole metres from 10 m on, else tenths.
func metres(x float64) string {
	if math.Abs(x) >= 10 {
		return strconv.FormatFloat(x, 'f', 0, 64)
	}
	return strconv.FormatFloat(x, 'f', 1, 64)
}

// probability prints a probability without claiming certainty.
func probability(p float64) string {
	switch {
	case p > 0.999:
		return "more than 0.999"
	case p < 0.001:
		return "less than 0.001"
	}
	return strconv.FormatFloat(p, 'f', 3, 64)
}
