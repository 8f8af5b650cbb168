package fitsread

import (
	"encoding/csv"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

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
	fh, err := os.Open(filepath.Join(dir, "truth.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer fh.Close()
	rows, err := csv.NewReader(fh).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	medium := -1
	for i, name := range rows[0] {
		if name == "wavelengths" {
			medium = i
		}
	}
	files, spectra := 0, 0
	mediumStated, frameStated := 0, 0
	for _, row := range rows[1:] {
		f, err := Open(filepath.Join(dir, row[0]), Options{})
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
			stated := strings.HasPrefix(row[medium], s.Medium.String())
			presumed := row[medium] == "" || strings.Contains(row[medium], "presumed")
			if !stated && !presumed && !s.Has(spectrum.MediumAssumed) {
				t.Errorf("%s: %s, not assumed; published: %s", row[0], s.Medium, row[medium])
			}
			if !s.Has(spectrum.MediumAssumed) {
				mediumStated++
			}
			if s.Has(spectrum.FrameAssumed) || s.Has(spectrum.FrameUncertain) || s.Has(spectrum.RestFrameStated) {
				continue
			}
			frameStated++
			if why := f.plan.groups[0].obs.frameWhy; !strings.HasPrefix(why, "card ") && !strings.HasPrefix(why, "SPECSYS") {
				t.Errorf("%s: %s without doubt, and no card says so: %s", row[0], s.Frame, why)
			}
		}
		f.Close()
	}
	t.Logf("%d files, %d spectra; %d state their medium, %d their frame, the others are flagged", files, spectra, mediumStated, frameStated)
	if files != 258 || spectra != 270 {
		t.Errorf("%d files, %d spectra read; 258 and 270 are there", files, spectra)
	}
}
