package pipeline

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"duskline/absorbers"
	"duskline/catalog"
	"duskline/configs"
	"duskline/linelist"
	"duskline/lines"
	"duskline/redshift"
	"duskline/spectrum"
)

// Chain is the science of a run: standard frame, grid, redshift, continuum,
// lines and verdict, object by object. It is immutable and implements
// Processor.
type Chain struct {
	set        Settings
	list       *linelist.List
	finder     *redshift.Finder
	meter      *lines.Meter
	absorbers  *absorbers.Finder
	thresholds redshift.Thresholds
	noted      []lines.Band // see Settings.notedBands
	indices    []lines.Index
	digests    map[string]string
}

// NewChain builds the chain from the built-in line list and the built-in template
// families, with the recipes of a user over them (see Templates).
func NewChain(set Settings, recipes ...RecipeText) (*Chain, error) {
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		return nil, err
	}
	c := &Chain{set: set, noted: set.notedBands(), list: list, meter: lines.NewMeter(list), absorbers: absorbers.NewFinder(list), digests: map[string]string{"lines": list.Digest()}}
	tried, err := templates(list, recipes)
	if err != nil {
		return nil, err
	}
	var families []*redshift.Family
	for _, t := range tried {
		families = append(families, t.Family)
		c.digests["family "+t.Family.Name] = t.Digest
	}
	opt := set.finderOptions()
	for _, l := range slices.Concat(list.Lines(), list.Rare()) {
		if l.Seen != "absorption" {
			opt.Lines = append(opt.Lines, l.Wave)
		}
		if l.Galactic {
			opt.Galactic = append(opt.Galactic, l.Name)
		}
	}
	opt.Night = list.Night()
	c.finder, err = redshift.NewFinder(families, set.Grid.Step, opt)
	if err != nil {
		return nil, err
	}
	c.thresholds = set.thresholds()
	return c, c.readIndices()
}

// Digests identifies the line list and every template family.
func (c *Chain) Digests() map[string]string { return c.digests }

// NewWorker returns a worker with scratch of its own.
func (c *Chain) NewWorker() Worker { return c.NewBench() }

// NewBench returns the worker as its own type, which also shows what it did.
func (c *Chain) NewBench() *Bench {
	return &Bench{
		chain:   c,
		gridder: spectrum.Gridder{Step: c.set.Grid.Step, MinWave: c.set.Grid.MinWave, MaxWave: c.set.Grid.MaxWave},
		scratch: c.finder.NewScratch(),
	}
}

// Bench is a worker of a Chain.
type Bench struct {
	chain    *Chain
	gridder  spectrum.Gridder
	grid     spectrum.Grid
	scratch  *redshift.Scratch
	level    level
	spikes   int // pixels that MaskSpikes took
	measured lines.Scratch
	sight    sightline
	x        []float64
	arms     []lines.Arm
	results  []lines.Result
}

// Process takes one spectrum through the chain.
func (b *Bench) Process(s *spectrum.Spectrum) Outcome {
	b.level.ready, b.results = false, b.results[:0]
	b.lay(s)
	res, beyond, flags := b.find(s)
	obj := b.object(s, &res)
	obj.Flags |= flags
	if beyond != "" {
		obj.Reason = strings.TrimPrefix(obj.Reason+"; "+beyond, "; ")
	}
	if res.Verdict == redshift.None {
		return Outcome{Object: obj}
	}
	if !b.measure(s, &res) {
		obj.Reason = strings.TrimPrefix(obj.Reason+"; no lines measured: too few usable pixels for their continuum", "; ")
	}
	if b.leansOnSky(&res) {
		obj.Flags |= catalog.OnSkyLine
	}
	return Outcome{Object: obj, Indices: b.indexRows(&res), Lines: lineRows(b.results, profileOf(b.chain.set.Lines.Profile)), Absorbers: b.absorb(&res)}
}

// lay brings a spectrum to the standard frame and onto the grid.
func (b *Bench) lay(s *spectrum.Spectrum) {
	observed := s.Frame
	s.ToStandard()
	if s.Frame == observed {
		s.BaryVelocity = math.NaN() // nothing was applied
	}
	b.spikes = 0
	if k := b.chain.set.Redshift.SpikeSigmas; k > 0 {
		b.spikes = s.MaskSpikes(k)
	}
	s.RescaleArms(minSharedPixels)
	b.gridder.Grid(&b.grid, s)
}

// minSharedPixels is the overlap that arms need before one is scaled to meet
// the other.
const minSharedPixels = 10

// leansOnSky reports whether fewer than two supporting lines are left when
// those on night-sky lines and telluric bands are set aside, and any are there.
func (b *Bench) leansOnSky(res *redshift.Result) bool {
	clean, sky := 0, 0
	for i := range b.results {
		switch r := &b.results[i]; {
		case !supports(res, r.Name):
		case r.OnSky:
			sky++
		default:
			clean++
		}
	}
	return sky > 0 && clean < 2
}

// supports reports whether a line stands out in the winning model.
func supports(res *redshift.Result, name string) bool {
	for _, e := range res.Lines {
		if e.Name == name && e.Seen {
			return true
		}
	}
	return false
}

// measure fits the final continuum with the lines of the found redshift masked
// and measures the lines on the spectrum's own pixels. It reports false when no
// continuum could be had.
func (b *Bench) measure(s *spectrum.Spectrum, res *redshift.Result) bool {
	g := &b.grid
	b.x = resized(b.x, g.Len())
	for i := range b.x {
		b.x[i] = g.LogWave(i)
	}
	if !b.level.fit(g, b.x, res, &b.chain.set) {
		return false
	}
	if cap(b.arms) < len(s.Segments) {
		b.arms = append(b.arms[:cap(b.arms)], make([]lines.Arm, len(s.Segments)-cap(b.arms))...)
	}
	b.arms = b.arms[:len(s.Segments)]
	for k := range s.Segments {
		seg, arm := &s.Segments[k], &b.arms[k]
		n := seg.Len()
		arm.Wave, arm.Flux, arm.Ivar, arm.Resolution = seg.Wave, seg.Flux, seg.Ivar, seg.Resolution
		arm.Cont, arm.ContErr = resized(arm.Cont, n), resized(arm.ContErr, n)
		for i, w := range seg.Wave {
			x := math.Log10(w)
			if !b.level.covers(x, g.Step) || b.level.absorbed(g, x) {
				arm.Cont[i], arm.ContErr[i] = math.NaN(), math.NaN()
				continue
			}
			arm.Cont[i], arm.ContErr[i] = b.level.Value(x), b.level.Sigma(x)
		}
	}
	opt := lines.Options{
		Z: res.Redshift, ZErr: res.RedshiftErr, Broad: res.Class == catalog.Quasar,
		WidthGuess: math.Min(res.Width, maxWidthGuess), Sky: b.chain.noted,
		Profile: profileOf(b.chain.set.Lines.Profile), WindowKms: b.chain.set.Lines.WindowKms, MinGood: b.chain.set.Lines.MinGood, Expect: expectation(res),
	}
	if opt.Broad && res.Width > broadFromKms {
		opt.WidthGuess = narrowShare * res.Width
	}
	if b.level.wide {
		opt.ContinuumSlack, opt.Stark = 0.01, true
	}
	b.results = b.chain.meter.Measure(b.results, b.arms, opt, &b.measured)
	b.level.withPartners(b.results)
	if res.Class == catalog.Star {
		b.results = lines.Fold(b.results)
	}
	return true
}

// expectation says which lines objects of the found kind have: stars no
// forbidden lines, those too cool for it no helium and no ions of the far
// ultraviolet, those too hot for it no molecules.
func expectation(res *redshift.Result) func(*linelist.Line) bool {
	if res.Class != catalog.Star {
		return nil
	}
	cool := res.Family != "hot" && res.Family != "helium"
	return func(l *linelist.Line) bool {
		if l.Seen == "emission" && l.Ion != "He II" {
			return false
		}
		switch l.Ion {
		case "He I", "He II", "O VI", "N V", "Si IV", "C IV", "Al III", "Si III":
			return !cool
		case "CH":
			return cool
		}
		return true
	}
}

// What an assumption leaves open, km/s: half of what separates air and vacuum,
// and the rms of the observer's velocity over the year and the sky (common
// practice, no source).
const (
	mediumDoubt = 41
	frameDoubt  = 17
)

// maxWidthGuess keeps the width of a line that is not seen, km/s, from that of
// a quasar's broadest.
const maxWidthGuess = 1500

// narrowShare is the width of a quasar's narrow lines in units of that of the
// broad ones, as package lines has it the other way round (common practice, no
// source: 300 to 600 km/s beside 3,000 to 6,000 at half maximum).
const narrowShare = 0.1

// object fills the row of the object table.
func (b *Bench) object(s *spectrum.Spectrum, res *redshift.Result) catalog.Object {
	o := catalog.Object{
		ObjectID: s.ObjectID, SourceFile: s.SourceFile, SourceRow: int64(s.SourceRow), RA: s.RA, Dec: s.Dec,
		Class: catalog.Unknown, Family: res.Family, Redshift: res.Redshift, RedshiftErr: res.RedshiftErr,
		Confidence: res.Confidence, Verdict: res.Verdict.String(), RivalRedshift: res.RivalRedshift, RivalFamily: res.RivalFamily,
		Gap: res.Gap, RStat: res.RStat, LinesSeen: int32(res.LinesSeen), SNR: res.SNR, PixelsUsed: int32(res.PixelsUsed),
		WaveMin: math.NaN(), WaveMax: math.NaN(), Chi2Dof: res.Chi2Dof,
		VelocityFrame: s.Frame.String(), BaryVelocity: s.BaryVelocity, FluxUnit: s.FluxUnit, Magnitude: math.NaN(),
	}
	if res.Class != "" && res.Verdict != redshift.None {
		o.Class = res.Class
	}
	if n, first, last := b.grid.Good(); n > 0 {
		o.WaveMin, o.WaveMax = math.Pow(10, b.grid.LogWave(first)), math.Pow(10, b.grid.LogWave(last))
	}
	for _, d := range []struct {
		set  bool
		flag catalog.Flags
	}{
		{res.FewPixels, catalog.FewPixels}, {res.Faint, catalog.Faint}, {res.Tied, catalog.Tied}, {res.RangeEnd, catalog.RangeEnd},
		{res.LoneLine, catalog.LoneLine}, {res.Misfit, catalog.Misfit}, {res.Unseen, catalog.LinesUnseen},
		{res.LinesMissing > 0, catalog.LinesMissing}, {res.BelowZero, catalog.BelowZero}, {res.Scattered, catalog.Scattered},
		{s.Has(spectrum.MediumAssumed) || s.Has(spectrum.FrameAssumed) || s.Has(spectrum.FrameUncertain) ||
			s.Frame == spectrum.RestFrame || s.Frame == spectrum.OtherFrame, catalog.FrameAssumed},
		{s.Has(spectrum.NoiseEstimated), catalog.NoiseEstimated}, {s.Has(spectrum.WeightsSuspect), catalog.WeightsSuspect},
		{res.Normalized, catalog.Normalized}, {res.OnSky, catalog.OnSkyLine},
		{res.Unexplained, catalog.Unexplained}, {res.FewLines, catalog.FewLines}, {res.LowConfidence, catalog.LowConfidence},
	} {
		if d.set {
			o.Flags |= d.flag
		}
	}
	// What was assumed may be wrong: the redshift is no better than that.
	if s.Has(spectrum.MediumAssumed) {
		o.RedshiftErr = math.Hypot(o.RedshiftErr, (1+o.Redshift)*mediumDoubt/spectrum.SpeedOfLight)
	}
	if s.Has(spectrum.FrameAssumed) || s.Has(spectrum.FrameUncertain) {
		o.RedshiftErr = math.Hypot(o.RedshiftErr, (1+o.Redshift)*frameDoubt/spectrum.SpeedOfLight)
	}
	why := b.doubts(res)
	if res.FewPixels {
		why = []string{b.fewPixels(s, res.Reason)}
	}
	if s.Frame == spectrum.RestFrame || s.Frame == spectrum.OtherFrame {
		why = append(why, fmt.Sprintf("wavelengths are in the %s frame and were kept: the redshift is in that frame", s.Frame))
	}
	if res.Unexplained {
		why = append(why, "narrow emission that no known line at this redshift explains, as a second object in the aperture would have, at "+waves(res.Leftovers))
	}
	for _, w := range s.Warnings {
		why = append(why, w.Text)
	}
	o.Reason = strings.Join(why, "; ")
	return o
}

// waves writes the first wavelengths of a list.
func waves(list []float64) string {
	const most = 4
	var text []string
	for _, w := range list[:min(most, len(list))] {
		text = append(text, fmt.Sprintf("%.0f", w))
	}
	more := ""
	if len(list) > most {
		more = fmt.Sprintf(" and %d more", len(list)-most)
	}
	return strings.Join(text, ", ") + " Angstrom" + more
}

// doubts says in words why a redshift is not secure.
func (b *Bench) doubts(res *redshift.Result) []string {
	if res.Reason != "" {
		return []string{res.Reason}
	}
	if res.Verdict == redshift.Secure {
		return nil
	}
	var why []string
	t := &b.chain.thresholds
	switch {
	case res.Faint:
		why = append(why, "neither continuum nor lines stand above the noise")
	case res.LinesSeen == 0:
		why = append(why, "no line stands out by itself")
	case res.LinesSeen < t.SecureLines:
		why = append(why, fmt.Sprintf("only %d of %d needed features stand out", res.LinesSeen, t.SecureLines))
	case res.OnSky:
		why = append(why, fmt.Sprintf("only %d of %d needed features stand out that are not on night-sky lines or in bands of water", res.LinesSeen-res.LinesOfAir, t.SecureLines))
	}
	if (res.Confidence < t.SecureConfidence || res.Tied) && !res.Faint {
		switch {
		case !res.Tight:
			why = append(why, "the templates explain little more than the continuum alone")
		case res.Confidence >= t.SecureConfidence:
			why = append(why, fmt.Sprintf("family %s at %.4f explains %.0f %% as much", res.RivalFamily, res.RivalRedshift, 100*(1-res.Gap/res.Drop)))
		case res.Misfit && !res.Tied:
			why = append(why, fmt.Sprintf("chi2/dof of %.1f is too bad to rule out family %s at %.4f", res.Chi2Dof, res.RivalFamily, res.RivalRedshift))
		default:
			why = append(why, fmt.Sprintf("family %s at %.4f fits nearly as well", res.RivalFamily, res.RivalRedshift))
		}
	}
	if res.Chi2Dof >= t.HopelessChi2 {
		why = append(why, fmt.Sprintf("no family describes the spectrum: chi2/dof is %.0f", res.Chi2Dof))
	}
	if res.StrongMissing() > 0 {
		why = append(why, "lines that should be strong are not there")
	}
	if res.WeakMissing {
		why = append(why, "the weaker lines that it should have are not there")
	}
	if res.ForestMissing {
		why = append(why, "the Lyman-alpha forest, deep at this redshift, is not there")
	}
	if res.Scattered {
		why = append(why, "the lines disagree on the velocity")
	}
	if res.Dark || res.Class == catalog.Quasar && !res.InEmission {
		why = append(why, "no emission line stands out, and the family is one of emission lines")
	}
	if res.Foreground {
		why = append(why, "what stands out may be gas of our own Galaxy in front of something else")
	}
	if res.Bare() {
		why = append(why, "the input looks divided by its continuum: without broad lines and breaks an absorber passes for the object")
	}
	if res.Blind() {
		why = append(why, "less than half of the lines it should have are covered, and the model does not fit")
	}
	if res.RangeEnd {
		why = append(why, "the redshift lies at the end of the family's range")
	}
	return why
}

// profileOf names the form of lines that a setting asks for.
func profileOf(name string) lines.Profile {
	switch name {
	case "gauss-hermite":
		return lines.Hermite
	case "voigt":
		return lines.Voigt
	}
	return lines.Gaussian
}

// lineRows copies measured lines into catalog rows.
func lineRows(results []lines.Result, profile lines.Profile) []catalog.Line {
	rows := make([]catalog.Line, len(results))
	nan := math.NaN()
	for i, r := range results {
		hermite, voigt := [4]float64{r.Shape[0], r.ShapeErr[0], r.Shape[1], r.ShapeErr[1]}, [2]float64{nan, nan}
		if profile == lines.Voigt {
			hermite, voigt = [4]float64{nan, nan, nan, nan}, [2]float64{r.Shape[0], r.ShapeErr[0]}
		}
		rows[i] = catalog.Line{
			Line: r.Name, RestWave: r.RestWave, Kind: r.Kind, EWRest: r.EWRest, EWRestErr: r.EWRestErr, EWSum: r.EWSum, EWSumErr: r.EWSumErr,
			Flux: r.Flux, FluxErr: r.FluxErr, OffsetKms: r.OffsetKms, OffsetErr: r.OffsetErr, WidthKms: r.WidthKms, WidthErr: r.WidthErr,
			SNR: r.SNR, Continuum: r.Continuum, UpperLimit: r.UpperLimit, Blend: r.Blend, Pixels: int32(r.Pixels), Reason: lineReason(&r),
			H3: hermite[0], H3Err: hermite[1], H4: hermite[2], H4Err: hermite[3], LorentzKms: voigt[0], LorentzErr: voigt[1],
		}
	}
	return rows
}

// lineReason joins what there is to say about a line.
func lineReason(r *lines.Result) string {
	switch {
	case !r.OnSky:
		return r.Reason
	case r.Reason == "":
		return "on_sky"
	}
	return r.Reason + "|on_sky"
}

func resized(s []float64, n int) []float64 {
	if cap(s) < n {
		return make([]float64, n)
	}
	return s[:n]
}
