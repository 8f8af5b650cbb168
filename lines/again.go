package lines

import "slices"

// lent is what blends lend to later ones: offsets and widths of strong lines.
type lent struct {
	anchor [2][2]kinematics
	series [2]kinematics // of the strongest line of hydrogen in a quasar, by sign
	wings  kinematics    // of the strongest line of hydrogen in a hot star
}

// done is a blend that the first round has measured: its tracks are
// wasMember[first:first+count], and it has lent what differs from zero.
type done struct {
	first, count int
	faint        bool
	lent         lent
}

// was is what a track was after the first round.
type was struct {
	result, second Result
	high           [2]float64
}

// round looks for the lines and fits them. In a second round, after lines were
// barred, blends without these stay as they were measured; those in which nothing was seen
// as long as what they borrow is the same.
func (s *Scratch) round(again bool) {
	if again {
		s.was = s.was[:0]
		for i := range s.tracks {
			t := &s.tracks[i]
			s.was = append(s.was, was{t.result, t.second, t.high})
		}
	} else {
		s.done, s.wasMember = s.done[:0], s.wasMember[:0]
	}
	s.claims = s.claims[:0]
	s.load()
	s.survey()
	s.findTracks()
	if !again && s.glows() {
		s.claims = s.claims[:0]
		s.survey()
		s.findTracks()
	}
	s.plan()
	for _, faint := range []bool{false, true} {
		keep := again
		if faint && again {
			keep = s.lent == s.borrowed
		} else if faint {
			s.borrowed = s.lent
		}
		for _, i := range s.order {
			b := &s.blends[i]
			if b.faint != faint || keep && s.reuse(b) {
				continue
			}
			before := s.lent
			s.measureBlend(b)
			if !again && b.faint == faint {
				s.note(b, &before)
			}
		}
	}
}

// note keeps what a second round needs of a blend.
func (s *Scratch) note(b *blend, before *lent) {
	d := done{first: len(s.wasMember), count: b.count, faint: b.faint}
	s.wasMember = append(s.wasMember, s.member[b.first:b.first+b.count]...)
	for i := range s.anchor {
		for k := range s.anchor[i] {
			if s.anchor[i][k] != before.anchor[i][k] {
				d.lent.anchor[i][k] = s.anchor[i][k]
			}
		}
	}
	for k := range s.series {
		if s.series[k] != before.series[k] {
			d.lent.series[k] = s.series[k]
		}
	}
	if s.wings != before.wings {
		d.lent.wings = s.wings
	}
	s.done = append(s.done, d)
}

// reuse gives a blend its results of the first round, if it has the same lines, none of them
// was barred and none may be more than it was, and reports whether it has.
func (s *Scratch) reuse(b *blend) bool {
	members := s.member[b.first : b.first+b.count]
	for _, i := range members {
		if t := &s.tracks[i]; s.bar[t.index] != inList || s.meter == s.labeled.flaring && t.line.Seen != s.labeled.lines[t.index].Seen {
			return false
		}
	}
	for i := range s.done {
		d := &s.done[i]
		if d.faint != b.faint || !slices.Equal(members, s.wasMember[d.first:d.first+d.count]) {
			continue
		}
		for _, k := range members {
			t, w := &s.tracks[k], &s.was[k]
			t.stands, t.result, t.second, t.high = true, w.result, w.second, w.high
		}
		for i := range s.anchor {
			for k := range s.anchor[i] {
				s.anchor[i][k].raise(d.lent.anchor[i][k])
			}
		}
		for k := range s.series {
			s.series[k].raise(d.lent.series[k])
		}
		s.wings.raise(d.lent.wings)
		return true
	}
	return false
}

// raise takes the better of two.
func (a *kinematics) raise(b kinematics) {
	if b.snr > a.snr {
		*a = b
	}
}
