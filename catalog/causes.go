package catalog

import (
	"maps"
	"slices"
	"strings"
)

// Facts returns everything that the metadata of a table says, by name.
func (r *ParquetReader[T]) Facts() map[string]string {
	out := map[string]string{}
	for _, kv := range r.file.Metadata().KeyValueMetadata {
		out[kv.Key] = kv.Value
	}
	return out
}

// Causes names what two catalogs were made with differently, from the facts of
// their tables: the program, its build, settings by key with both values,
// recipes, line list and other digests.
func Causes(old, now map[string]string) []string {
	var out []string
	if old["creator"] != now["creator"] {
		out = append(out, "program ("+old["creator"]+" and "+now["creator"]+")")
	} else if old["build"] != now["build"] {
		out = append(out, "build of the program")
	}
	before, after := keysOf(old["settings"]), keysOf(now["settings"])
	for _, key := range names(before, after) {
		if before[key] != after[key] {
			out = append(out, "setting "+key+" ("+before[key]+" and "+after[key]+")")
		}
	}
	for _, name := range names(old, now) {
		what, isDigest := strings.CutPrefix(name, "digest.")
		if !isDigest || what == "settings" || what == "calibration" || old[name] == now[name] {
			continue // settings are told one by one
		}
		switch {
		case old[name] == "":
			what += " (new)"
		case now[name] == "":
			what += " (gone)"
		default:
			what += " (changed)"
		}
		out = append(out, what)
	}
	return out
}

// Cause says for one object why it may have changed, given Causes: its input,
// or the family it was or is found with if that is among them, or else all of
// them.
func (d *Change) Cause(causes []string) string {
	if !d.SameInput {
		return "input"
	}
	for _, family := range []string{d.New.Family, d.Old.Family} {
		for _, c := range causes {
			if family != "" && strings.HasPrefix(c, "family "+family+" ") {
				return c
			}
		}
	}
	if len(causes) == 0 {
		return "unknown"
	}
	return strings.Join(causes, "; ")
}

func names(a, b map[string]string) []string {
	out := slices.Sorted(maps.Keys(a))
	for name := range b {
		if _, ok := a[name]; !ok {
			out = append(out, name)
		}
	}
	slices.Sort(out)
	return out
}

// keysOf reads "section.key" to value from settings as they are written with
// every catalog: [section], then key = value.
func keysOf(settings string) map[string]string {
	out := map[string]string{}
	section := ""
	for line := range strings.Lines(settings) {
		line = strings.TrimSpace(line)
		if strings.HasPrefix(line, "[") {
			section = strings.Trim(line, "[]")
		} else if key, value, ok := strings.Cut(line, "="); ok {
			out[section+"."+strings.TrimSpace(key)] = strings.TrimSpace(value)
		}
	}
	return out
}
