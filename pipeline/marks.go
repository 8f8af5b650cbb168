package pipeline

import (
	"math"
	"strings"

	"duskline/configs"
	"duskline/linelist"
)

// Mark is a line to be pointed out in a picture of a spectrum.
type Mark struct {
	Label    string  // such as "[O III] 5007"
	Wave     float64 // observed, vacuum Angstrom
	Emission bool
	SNR      float64
}

// Marks returns the lines of an outcome that were seen, in order of
// wavelength; none without a redshift.
func Marks(out *Outcome) []Mark {
	if math.IsNaN(out.Object.Redshift) {
		return nil
	}
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		panic("configs/lines.toml: " + err.Error()) // the build is broken
	}
	var marks []Mark
	for i := range out.Lines {
		l := &out.Lines[i]
		if l.Kind != "emission" && l.Kind != "absorption" {
			continue
		}
		name, broad := strings.CutSuffix(l.Line, "_broad") // a second component, see docs/lines.md
		known, _ := list.Find(name)
		label := lineLabel(name, known.Ion)
		if broad {
			label += " broad"
		}
		marks = append(marks, Mark{label, l.RestWave * (1 + out.Object.Redshift), l.Kind == "emission", l.SNR})
	}
	return marks
}

var greek = strings.NewReplacer("a", "α", "b", "β", "g", "γ", "d", "δ", "e", "ε")

// lineLabel writes a line as astronomers do: "Hα", "[O III] 5007", "Ca II K".
func lineLabel(name, ion string) string {
	for _, series := range []string{"Ly", "H", "Pa"} {
		if upper, ok := strings.CutPrefix(name, series); ok && len(upper) == 1 {
			return series + greek.Replace(upper)
		}
	}
	if name == "Gband" {
		return "G band"
	}
	if _, rest, ok := strings.Cut(name, "_"); ok && ion != "" {
		return ion + " " + rest
	}
	return name
}
