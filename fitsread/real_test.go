package fitsread

import (
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"duskline/internal/checkvalues"
	"duskline/internal/outside"
	"duskline/spectrum"
)

// moduleDir finds the source of a module in the module cache.
func moduleDir(t testing.TB, module string) string {
	t.Helper()
	out, err := exec.Command("go", "list", "-m", "-f", "{{.Dir}}", module).Output()
	if err != nil {
		t.Fatalf("go list %s: %v", module, err)
	}
	return strings.TrimSpace(string(out))
}

// Every file of ../shared/spectra opens and reads, and its medium is the one
// that truth.csv (column wavelengths) gives or is flagged as assumed. The table says
// nothing of velocity frames: a frame is that of a card, or flagged.
func TestRealSpectra(t *testing.T) {
	dir := outside.Spectra(t)
	table := checkvalues.Read(t, filepath.Join(dir, "truth.csv"), 258)
	files, spectra := 0, 0
	mediumStated, frameStated := 0, 0
	for i := range table.Len() {
		name, medium := table.Text(i, "file"), table.Text(i, "wavelengths")
		f, err := Open(filepath.Join(dir, name), Options{})
		if err != nil {
			t.Errorf("%v", err)
			continue
		}
		files++
		for i := range f.Count() {
			s, err := f.Read(i)
			if err != nil {
				t.Errorf("%v", err)
				continue
			}
			checkContract(t, s)
			spectra++
			stated := strings.HasPrefix(medium, s.Medium.String())
			presumed := medium == "" || strings.Contains(medium, "presumed")
			if !stated && !presumed && !s.Has(spectrum.MediumAssumed) {
				t.Errorf("%s: %s, not assumed; published: %s", name, s.Medium, medium)
			}
			if !s.Has(spectrum.MediumAssumed) {
				mediumStated++
			}
			if s.Has(spectrum.FrameAssumed) || s.Has(spectrum.FrameUncertain) || s.Has(spectrum.RestFrameStated) {
				continue
			}
			frameStated++
			if why := f.plan.groups[0].obs.frameWhy; !strings.HasPrefix(why, "card ") && !strings.HasPrefix(why, "SPECSYS") {
				t.Errorf("%s: %s without doubt, and no card says so: %s", name, s.Frame, why)
			}
		}
		f.Close()
	}
	t.Logf("%d files, %d spectra; %d state their medium, %d their frame, the others are flagged", files, spectra, mediumStated, frameStated)
	if files != 258 || spectra != 270 {
		t.Errorf("%d files, %d spectra read; 258 and 270 are there", files, spectra)
	}
}
