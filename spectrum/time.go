package spectrum

import (
	"fmt"
	"strconv"
	"strings"
	"time"
)

// mjdZero is the Julian date of Modified Julian Date 0 (1858 November 17, 0h).
const mjdZero = 2400000.5

// MJDToJD returns the Julian date of a Modified Julian Date.
func MJDToJD(mjd float64) float64 { return mjd + mjdZero }

// JDToMJD returns the Modified Julian Date of a Julian date.
func JDToMJD(jd float64) float64 { return jd - mjdZero }

// ParseUTC returns the Julian date of a date or time as FITS headers write it
// (FITS standard 4.0, section 9.1.1): "2031-03-14", "2031-03-14T09:15:26.5",
// also without seconds or leading zeros, with a closing Z or a space for the T, and
// the form before 1999, "14/03/98", whose years are 1900 to 1999. A date alone
// means its 0h. The 61st second of a minute with a leap second counts as the
// first of the next. The error quotes the text.
func ParseUTC(s string) (jd float64, err error) {
	text := strings.TrimSuffix(strings.TrimSpace(s), "Z")
	date, clock, hasClock := strings.Cut(text, "T")
	if !hasClock {
		date, clock, hasClock = strings.Cut(text, " ")
	}
	y, m, d, ok := parseDate(date)
	if !ok {
		return 0, fmt.Errorf("%q is not a date of the form YYYY-MM-DD[Thh:mm:ss[.sss]] or DD/MM/YY", s)
	}
	midnight := time.Date(y, time.Month(m), d, 0, 0, 0, 0, time.UTC)
	if midnight.Day() != d || int(midnight.Month()) != m {
		return 0, fmt.Errorf("%q: there is no day %d in month %d of %d", s, d, m, y)
	}
	const unixEpoch = 2440587.5
	jd = float64(midnight.Unix()/86400) + unixEpoch
	if !hasClock {
		return jd, nil
	}
	seconds, ok := parseClock(strings.TrimSpace(clock))
	if !ok {
		return 0, fmt.Errorf("%q: the time of day is not of the form hh:mm[:ss[.sss]]", s)
	}
	return jd + seconds/86400, nil
}

func parseDate(s string) (y, m, d int, ok bool) {
	if p := strings.Split(s, "-"); len(p) == 3 && len(p[0]) == 4 {
		y, ok1 := digits(p[0], 0, 9999)
		m, ok2 := digits(p[1], 1, 12)
		d, ok3 := digits(p[2], 1, 31)
		return y, m, d, ok1 && ok2 && ok3
	}
	if p := strings.Split(s, "/"); len(p) == 3 && len(p[2]) == 2 {
		d, ok1 := digits(p[0], 1, 31)
		m, ok2 := digits(p[1], 1, 12)
		y, ok3 := digits(p[2], 0, 99)
		return 1900 + y, m, d, ok1 && ok2 && ok3
	}
	return 0, 0, 0, false
}

func parseClock(s string) (seconds float64, ok bool) {
	p := strings.Split(s, ":")
	if len(p) != 2 && len(p) != 3 {
		return 0, false
	}
	h, ok1 := digits(p[0], 0, 23)
	m, ok2 := digits(p[1], 0, 59)
	if !ok1 || !ok2 {
		return 0, false
	}
	seconds = float64(h*3600 + m*60)
	if len(p) == 2 {
		return seconds, true
	}
	whole, fraction, hasFraction := strings.Cut(p[2], ".")
	sec, ok := digits(whole, 0, 60)
	if !ok {
		return 0, false
	}
	seconds += float64(sec)
	if hasFraction && fraction != "" {
		for _, c := range fraction {
			if c < '0' || c > '9' {
				return 0, false
			}
		}
		f, err := strconv.ParseFloat("0."+fraction, 64)
		if err != nil {
			return 0, false
		}
		seconds += f
	}
	return seconds, true
}

// digits reads an unsigned whole number of up to four digits within bounds.
func digits(s string, lo, hi int) (int, bool) {
	if s == "" || len(s) > 4 {
		return 0, false
	}
	n := 0
	for _, c := range s {
		if c < '0' || c > '9' {
			return 0, false
		}
		n = 10*n + int(c-'0')
	}
	return n, n >= lo && n <= hi
}

// leapSeconds lists the Julian date (UTC) from which TAI-UTC has the value
// beside it, from 1972 on: IERS Bulletin C; no leap second is announced after
// that of 2017 January 1.
var leapSeconds = [...]struct{ jd, taiMinusUTC float64 }{
	{2441317.5, 10}, {2441499.5, 11}, {2441683.5, 12}, {2442048.5, 13}, {2442413.5, 14},
	{2442778.5, 15}, {2443144.5, 16}, {2443509.5, 17}, {2443874.5, 18}, {2444239.5, 19},
	{2444786.5, 20}, {2445151.5, 21}, {2445516.5, 22}, {2446247.5, 23}, {2447161.5, 24},
	{2447892.5, 25}, {2448257.5, 26}, {2448804.5, 27}, {2449169.5, 28}, {2449534.5, 29},
	{2450083.5, 30}, {2450630.5, 31}, {2451179.5, 32}, {2453736.5, 33}, {2454832.5, 34},
	{2456109.5, 35}, {2457204.5, 36}, {2457754.5, 37},
}

// terrestrialTime returns the Julian date in TT of one in UTC: TAI-UTC plus
// 32.184 s. Before 1972 it takes the first value of the table and is off by up
// to ten seconds, in which the Earth's velocity changes by 6 cm/s.
func terrestrialTime(jdUTC float64) float64 {
	taiMinusUTC := leapSeconds[0].taiMinusUTC
	for _, l := range leapSeconds {
		if jdUTC >= l.jd {
			taiMinusUTC = l.taiMinusUTC
		}
	}
	return jdUTC + (taiMinusUTC+32.184)/86400
}

// UTC returns the Julian date in UTC of one in another time scale, named as TIMESYS
// of FITS headers does (FITS standard 4.0, table 30): UTC, GMT, UT1 and UT as
// they are; TAI, IAT and GPS by the leap seconds; TT, TDT, ET, TDB, TCG and TCB by
// 32.184 s more. TDB is within 2 ms of TT, TCG and TCB within half a minute this
// century, in which a barycentric velocity changes by at most 1 m/s. ok is false
// for LOCAL and names that are not known, whose date comes back unchanged.
func UTC(scale string, jd float64) (utc float64, ok bool) {
	var beyondTAI float64 // seconds
	switch strings.ToUpper(strings.TrimSpace(scale)) {
	case "", "UTC", "GMT", "UT", "UT1", "UT()":
		return jd, true
	case "TAI", "IAT":
	case "GPS":
		beyondTAI = -19
	case "TT", "TDT", "ET", "TDB", "TCG", "TCB":
		beyondTAI = 32.184
	default:
		return jd, false
	}
	tai := jd - beyondTAI/86400
	// The leap seconds are those of the date in UTC: two rounds settle it.
	utc = tai
	for range 2 {
		utc = tai - (terrestrialTime(utc) - utc) + 32.184/86400
	}
	return utc, true
}
