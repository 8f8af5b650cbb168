package pipeline

import (
	"fmt"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// unique runs IDs through names with files of so many IDs.
func unique(t interface{ Fatal(...any) }, folder string, ids []string, aPart int64) (out []string, n *names) {
	n, err := newNames(folder, int64(len(ids)), aPart)
	if err != nil {
		t.Fatal(err)
	}
	defer n.close()
	for _, id := range ids {
		if err := n.add(id); err != nil {
			t.Fatal(err)
		}
	}
	if err := n.settle(); err != nil {
		t.Fatal(err)
	}
	c, err := n.cursor()
	if err != nil {
		t.Fatal(err)
	}
	for _, id := range ids {
		name, err := c.unique(id)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, name)
	}
	return out, n
}

func TestRepeatedIDs(t *testing.T) {
	for _, k := range []struct{ ids, want string }{
		{"a b c", "a b c"},
		{"a a b a", "a a#2 b a#3"},
		{"a a#2 a", "a a#2 a#3"},                       // a number that is taken
		{"a a a#2", "a a#2 a#2#2"},                     // or was given
		{"a#2 a#2 a a", "a#2 a#2#2 a a#3"},             // #2 is there already
		{"p#07 p#07 p#x p#x", "p#07 p#07#2 p#x p#x#2"}, // no numbers as they are given
		{"x#1#1 x#1 x#1 x#1", "x#1#1 x#1 x#1#2 x#1#3"},
	} {
		got, _ := unique(t, t.TempDir(), strings.Fields(k.ids), 100)
		if text := strings.Join(got, " "); text != k.want {
			t.Errorf("%s gives %s, want %s", k.ids, text, k.want)
		}
	}
}

// TestNamesAreUnique whatever the IDs are, for any size of the files, and no
// more of them are changed than must be.
func TestNamesAreUnique(t *testing.T) {
	folder := t.TempDir()
	rapid.Check(t, func(t *rapid.T) {
		id := rapid.StringMatching(`[ab](#[0-3]|#[0-3]#[12])?`)
		ids := rapid.SliceOfN(id, 0, 60).Draw(t, "ids")
		one, n := unique(t, folder, ids, 1000)
		many, _ := unique(t, folder, ids, 5)
		seen, first := map[string]bool{}, map[string]bool{}
		repeated, extra := 0, 0
		for i, name := range one {
			if seen[name] {
				t.Fatalf("%q comes twice from %q", name, ids)
			}
			seen[name] = true
			if many[i] != name {
				t.Fatalf("files of five give %q where one gives %q", many[i], name)
			}
			if name != ids[i] {
				repeated++
				extra = max(extra, len(name)-len(ids[i]))
			}
			if first[ids[i]] = true; !strings.HasPrefix(name, ids[i]) {
				t.Fatalf("%q became %q", ids[i], name)
			}
		}
		if int64(repeated) != n.Repeated || extra != n.extra() {
			t.Fatalf("%d renamed by up to %d bytes, counted %d and %d", repeated, extra, n.Repeated, n.extra())
		}
	})
}

func TestReach(t *testing.T) {
	head := func(change func(*planHead, *Settings)) *planHead {
		set := DefaultSettings()
		h := &planHead{Program: "1", Build: "b", Digests: map[string]string{settingsDigest: "1", "lines": "2", "family hot": "3"}}
		if change != nil {
			change(h, &set)
		}
		h.Settings = string(set.Essential().TOML())
		return h
	}
	for name, k := range map[string]struct {
		change func(*planHead, *Settings)
		want   reach
	}{
		"nothing":     {nil, untouched},
		"block size":  {func(_ *planHead, s *Settings) { s.Run.BlockSize = 7 }, untouched},
		"layouts":     {func(h *planHead, _ *Settings) { h.Digests[layoutsDigest] = "9" }, untouched},
		"manifest":    {func(h *planHead, _ *Settings) { h.Digests[manifestDigest] = "9" }, untouched},
		"lines.*":     {func(_ *planHead, s *Settings) { s.Lines.WindowKms = 777 }, measured},
		"clip":        {func(_ *planHead, s *Settings) { s.Continuum.ClipLow = 7 }, measured},
		"knots":       {func(_ *planHead, s *Settings) { s.Continuum.KnotSpacing *= 2 }, every},
		"two at once": {func(_ *planHead, s *Settings) { s.Lines.WindowKms, s.Redshift.Nominees = 777, 3 }, every},
		"verdict":     {func(_ *planHead, s *Settings) { s.Verdict.TiedGap = 3 }, every},
		"line list":   {func(h *planHead, _ *Settings) { h.Digests["lines"] = "9" }, every},
		"family":      {func(h *planHead, _ *Settings) { h.Digests["family hot"] = "9" }, every},
		"new family":  {func(h *planHead, _ *Settings) { h.Digests["family odd"] = "9" }, every},
		"family gone": {func(h *planHead, _ *Settings) { delete(h.Digests, "family hot") }, every},
		"unheard of":  {func(h *planHead, _ *Settings) { h.Digests["weather"] = "9" }, every},
		"program":     {func(h *planHead, _ *Settings) { h.Program = "2" }, every},
		"build":       {func(h *planHead, _ *Settings) { h.Build = "c" }, every},
	} {
		if got, why := reachOf(head(nil), head(k.change)); got != k.want || got != untouched && len(why) == 0 {
			t.Errorf("%s: reach %d (%q), want %d", name, got, why, k.want)
		}
	}
	broken := head(nil)
	broken.Settings = "[nonsense]"
	if got, _ := reachOf(broken, head(nil)); got != every {
		t.Error("settings of another version leave rows untouched")
	}
}

func TestShards(t *testing.T) {
	for _, text := range []string{"", "1", "3/3", "-1/3", "1/0", "a/b", "1/2/3", " 1/2"} {
		if s, err := ParseShard(text); err == nil {
			t.Errorf("%q is shard %v", text, s)
		}
	}
	for n := 1; n < 6; n++ {
		for block := range 20 {
			owners := 0
			for i := range n {
				s, err := ParseShard(fmt.Sprintf("%d/%d", i, n))
				if err != nil {
					t.Fatal(err)
				}
				if s.has(block) {
					owners++
				}
			}
			if owners != 1 {
				t.Errorf("block %d of %d shards has %d owners", block, n, owners)
			}
		}
	}
}
