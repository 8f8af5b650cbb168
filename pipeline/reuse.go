package pipeline

import "strings"

// reach says which rows of an earlier run a change of what it was made with
// can have touched.
type reach int

const (
	untouched reach = iota // no row
	measured               // rows whose lines were measured: all but those of verdict none
	every                  // all rows
)

// reachOf compares two plans. What is not known here touches every row.
//
//   - Program, build, the line list, a template family, anything unknown: every
//     row. Each family takes part in the judgment of each object.
//   - Settings of section lines and those of continuum that only shape the
//     continuum under the lines: rows whose lines were measured.
//   - The other settings: every row, but section run has no say in results.
//   - Layouts and the manifest: none, since the digest of each input covers how
//     it was read and what the manifest says of it.
func reachOf(old, now *planHead) (reach, []string) {
	worst := untouched
	var why []string
	note := func(r reach, what string) {
		worst = max(worst, r)
		why = append(why, what)
	}
	if old.Program != now.Program || old.Build != now.Build {
		note(every, "program")
	}
	for name := range union(old.Digests, now.Digests) {
		if old.Digests[name] == now.Digests[name] {
			continue
		}
		switch name {
		case settingsDigest, calibrationDigest, layoutsDigest, manifestDigest:
		case IndicesDigest:
			note(measured, name)
		default:
			note(every, name)
		}
	}
	before, err := ParseSettings([]byte(old.Settings))
	after, err2 := ParseSettings([]byte(now.Settings))
	if err != nil || err2 != nil {
		note(every, settingsDigest)
		return worst, why
	}
	for _, d := range before.Differences(after) {
		key, _, _ := strings.Cut(d, " ")
		section, _, _ := strings.Cut(key, ".")
		switch {
		case section == "run":
		case section == "lines" || onlyMeasures[key]:
			note(measured, key)
		default:
			note(every, key)
		}
	}
	return worst, why
}

// onlyMeasures are settings outside section lines that have no part in finding
// the redshift.
var onlyMeasures = map[string]bool{
	"continuum.clip_low": true, "continuum.clip_high": true, "continuum.iterations": true, "continuum.mask_widths": true,
}

func union(a, b map[string]string) map[string]bool {
	names := map[string]bool{}
	for _, m := range []map[string]string{a, b} {
		for name := range m {
			names[name] = true
		}
	}
	return names
}
