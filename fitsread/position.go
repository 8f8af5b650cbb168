package fitsread

import (
	"math"
	"strconv"
	"strings"

	"duskline/spectrum"
)

// angle reads degrees: a number, or "dd:mm:ss.s"; with perHour the sexagesimal
// form is in hours. Signs count also where the degrees are zero.
func angle(c card, perHour bool) (float64, bool) {
	s := strings.TrimSpace(c.value())
	note := strings.ToLower(c.comment())
	if v, ok := parseNumber(s); ok {
		switch {
		case perHour && hasWord(note, "hours") || perHour && hasWord(note, "hour"):
			v *= 15
		case strings.HasPrefix(note, "rad") || hasAny(note, "radian"):
			v *= 180 / math.Pi
		}
		return v, true
	}
	v, ok := sexagesimal(s)
	if ok && perHour {
		v *= 15
	}
	return v, ok
}

func sexagesimal(s string) (float64, bool) {
	sign := 1.0
	if rest, ok := strings.CutPrefix(s, "-"); ok {
		sign, s = -1, rest
	}
	s = strings.TrimPrefix(s, "+")
	parts := strings.FieldsFunc(s, func(r rune) bool { return strings.ContainsRune(": hmsd°'\"", r) })
	if len(parts) < 2 || len(parts) > 3 {
		return 0, false
	}
	v, unit := 0.0, 1.0
	for i, p := range parts {
		x, err := strconv.ParseFloat(p, 64)
		if err != nil || !(x >= 0) || i > 0 && x > 60 {
			return 0, false
		}
		v += x * unit
		unit /= 60
	}
	return sign * v, true
}

// positionCards pairs the keywords of an object's position, most specific first:
// RA and DEC alone may be the telescope's.
var positionCards = [][2]string{
	{"RA_TARG", "DEC_TARG"}, {"RA_OBJ", "DEC_OBJ"}, {"RAOBJ", "DECOBJ"}, {"OBJRA", "OBJDEC"}, {"OBJ_RA", "OBJ_DEC"},
	{"OBJCTRA", "OBJCTDEC"}, {"PLUG_RA", "PLUG_DEC"}, {"TARG_RA", "TARG_DEC"}, {"TARGET_RA", "TARGET_DEC"},
	{"RA_ICRS", "DE_ICRS"}, {"RA", "DEC"}, {"RA_DEG", "DEC_DEG"}, {"RADEG", "DECDEG"}, {"RA-D", "DEC-D"},
	{"TELRA", "TELDEC"}, {"RA_PNT", "DEC_PNT"},
}

// cardPosition reads the position of the object in degrees, ICRS, NaN when the
// headers have none. Positions of another equinox are precessed. A position of
// exactly 0, 0 is an unfilled card.
func cardPosition(hs []*hdu) (ra, dec float64) {
	for _, keys := range positionCards {
		for _, h := range hs {
			c1, ok1 := h.header.find(keys[0])
			c2, ok2 := h.header.find(keys[1])
			if !ok1 || !ok2 {
				continue
			}
			ra, ok1 = angle(c1, true)
			dec, ok2 = angle(c2, false)
			if ok1 && ok2 && validPosition(ra, dec) {
				return toJ2000(ra, dec, equinox(hs))
			}
		}
	}
	return math.NaN(), math.NaN()
}

func validPosition(ra, dec float64) bool {
	return ra >= 0 && ra <= 360 && dec >= -90 && dec <= 90 && !(ra == 0 && dec == 0)
}

// equinox returns the year of the coordinates' equinox, 2000 unless stated.
func equinox(hs []*hdu) float64 {
	if c, ok := findCard(hs, "EQUINOX"); ok {
		if v, ok := parseNumber(strings.TrimLeft(c.value(), "JB")); ok && v > 1800 && v < 2200 {
			return v
		}
		return 2000
	}
	for _, key := range []string{"RADESYS", "RADECSYS"} {
		if c, ok := findCard(hs, key); ok {
			if strings.HasPrefix(strings.ToUpper(c.value()), "FK4") {
				return 1950
			}
			return 2000
		}
	}
	return 2000
}

// toJ2000 precesses a position to the equinox J2000 with the angles of the IAU
// 1976 precession (Lieske et al. 1977, A&A 58, 1). Against ICRS it is good to an
// arcsecond, from FK4 to a few: enough to name an object and to correct its
// velocity to 1 m/s.
func toJ2000(ra, dec, year float64) (float64, float64) {
	if math.Abs(year-2000) < 0.01 {
		return ra, dec
	}
	const arcsec = math.Pi / (180 * 3600)
	t := (year - 2000) / 100 // angles from J2000 to the equinox; applied backwards
	zeta := (2306.2181*t + 0.30188*t*t + 0.017998*t*t*t) * arcsec
	z := (2306.2181*t + 1.09468*t*t + 0.018203*t*t*t) * arcsec
	theta := (2004.3109*t - 0.42665*t*t - 0.041833*t*t*t) * arcsec
	a, d := ra*math.Pi/180-z, dec*math.Pi/180
	x := math.Cos(d) * math.Cos(a)
	y := math.Cos(d) * math.Sin(a)
	s := math.Sin(d)
	// Rotation by theta about the y axis, the transpose of the forward one.
	x, s = math.Cos(theta)*x+math.Sin(theta)*s, -math.Sin(theta)*x+math.Cos(theta)*s
	a = math.Mod(math.Atan2(y, x)-zeta+4*math.Pi, 2*math.Pi)
	return a * 180 / math.Pi, math.Asin(math.Max(-1, math.Min(1, s))) * 180 / math.Pi
}

// siteCards are the keywords of east longitude, latitude and height.
var siteCards = [][3]string{
	{"OBSGEO-L", "OBSGEO-B", "OBSGEO-H"}, {"ESO TEL GEOLON", "ESO TEL GEOLAT", "ESO TEL GEOELEV"},
	{"SITELONG", "SITELAT", "SITEALT"}, {"LONGITUD", "LATITUDE", "ALTITUDE"}, {"LONG-OBS", "LAT-OBS", "ALT-OBS"},
	{"OBS-LONG", "OBS-LAT", "OBS-ELEV"}, {"GEOLON", "GEOLAT", "GEOELEV"}, {"OBSLONG", "OBSLAT", "OBSALT"},
	{"SITELONG", "SITELAT", "SITEELEV"}, {"TELLONG", "TELLAT", "TELALT"},
}

// readSite returns where the telescope stands. West longitudes are told by their
// card's comment.
func readSite(hs []*hdu) (spectrum.Site, bool) {
	for _, keys := range siteCards {
		c1, ok1 := findCard(hs, keys[0])
		c2, ok2 := findCard(hs, keys[1])
		if !ok1 || !ok2 {
			continue
		}
		lon, ok1 := angle(c1, false)
		lat, ok2 := angle(c2, false)
		if !ok1 || !ok2 || math.Abs(lon) > 360 || math.Abs(lat) > 90 || lon == 0 && lat == 0 {
			continue
		}
		if note := strings.ToLower(c1.comment()); hasWord(note, "west") || hasWord(note, "w") {
			lon = -math.Abs(lon)
		}
		height, _, _ := findNumber(hs, keys[2])
		if height < -500 || height > 10000 {
			height = 0
		}
		return spectrum.Site{LonDeg: lon, LatDeg: lat, HeightM: height}, true
	}
	x, _, ok1 := findNumber(hs, "OBSGEO-X")
	y, _, ok2 := findNumber(hs, "OBSGEO-Y")
	z, _, ok3 := findNumber(hs, "OBSGEO-Z")
	if r := math.Sqrt(x*x + y*y + z*z); ok1 && ok2 && ok3 && r > 6.3e6 && r < 6.4e6 {
		return geodetic(x, y, z), true
	}
	return spectrum.Site{}, false
}

// geodetic converts geocentric coordinates in m to WGS84 longitude, latitude and
// height by iterating the latitude; a few rounds give millimeters.
func geodetic(x, y, z float64) spectrum.Site {
	const a, f = 6378137.0, 1 / 298.257223563
	const e2 = f * (2 - f)
	p := math.Hypot(x, y)
	lat := math.Atan2(z, p*(1-e2))
	var n float64
	for range 8 {
		s := math.Sin(lat)
		n = a / math.Sqrt(1-e2*s*s)
		lat = math.Atan2(z+e2*n*s, p)
	}
	s, c := math.Sincos(lat)
	return spectrum.Site{LonDeg: math.Atan2(y, x) * 180 / math.Pi, LatDeg: lat * 180 / math.Pi,
		HeightM: p*c + z*s - a*a/n}
}

// Julian dates of 1950 and 2100: no spectrum on disk is from outside.
const firstJD, lastJD = 2433282.5, 2488069.5

// midExposure returns the Julian date (UTC) of the middle of the exposure, NaN
// when the header has none: cards for the middle, else start and end, else start
// and exposure time, else the start alone. Of spectra added up over more than a
// day no single time is the right one: NaN. Times are in the scale that TIMESYS
// names, UTC without it; those in a local scale are not used.
func midExposure(hs []*hdu) float64 {
	scale := ""
	if c, ok := findCard(hs, "TIMESYS"); ok {
		scale = c.value()
	}
	jd, ok := spectrum.UTC(scale, middleTime(hs))
	if !ok {
		return math.NaN()
	}
	return jd
}

func validJD(jd float64) bool { return jd > firstJD && jd < lastJD }

// middleTime is midExposure in the time scale of the header.
func middleTime(hs []*hdu) float64 {
	for _, key := range []string{"MJD-AVG", "MJD-MID", "MJDMID", "TMID"} {
		if v, _, ok := findNumber(hs, key); ok && validJD(spectrum.MJDToJD(v)) {
			return spectrum.MJDToJD(v)
		}
	}
	for _, key := range []string{"DATE-AVG", "DATE-MID"} {
		if jd, ok := dateTime(hs, key); ok && validJD(jd) {
			return jd
		}
	}
	start := startTime(hs)
	if math.IsNaN(start) {
		return start
	}
	if end := endTime(hs); end >= start {
		if end > start+1 {
			return math.NaN()
		}
		return (start + end) / 2
	}
	for _, key := range []string{"EXPTIME", "EXPOSURE", "TEXPTIME", "ITIME", "XPOSURE", "TELAPSE"} {
		if v, _, ok := findNumber(hs, key); ok && v > 0 && v < 86400 {
			return start + v/2/86400
		}
	}
	return start
}

func startTime(hs []*hdu) float64 {
	for _, key := range []string{"MJD-OBS", "MJD-BEG", "MJDSTART", "EXPSTART", "TSTART"} {
		v, _, ok := findNumber(hs, key)
		if ok && v != math.Trunc(v) && validJD(spectrum.MJDToJD(v)) {
			return spectrum.MJDToJD(v)
		}
	}
	for _, key := range []string{"DATE-BEG", "DATE-OBS", "UT-DATE", "DATE_OBS"} {
		if jd, ok := dateTime(hs, key); ok && validJD(jd) {
			return jd
		}
	}
	return math.NaN()
}

func endTime(hs []*hdu) float64 {
	for _, key := range []string{"MJD-END", "EXPEND", "TSTOP"} {
		if v, _, ok := findNumber(hs, key); ok && validJD(spectrum.MJDToJD(v)) {
			return spectrum.MJDToJD(v)
		}
	}
	if jd, ok := dateTime(hs, "DATE-END"); ok && validJD(jd) {
		return jd
	}
	return math.NaN()
}

// dateTime reads a date card that carries the time of day or has it beside it.
func dateTime(hs []*hdu, key string) (float64, bool) {
	c, ok := findCard(hs, key)
	if !ok || strings.Contains(strings.ToLower(c.comment()), "local") {
		return 0, false
	}
	date := strings.TrimSpace(c.value())
	if jd, err := spectrum.ParseUTC(date); err != nil {
		return 0, false
	} else if strings.ContainsAny(date, "T ") {
		return jd, true
	}
	for _, clock := range []string{"UTC", "UT", "TIME-OBS", "UTSTART", "UT-START", "UTC-OBS", "TIME-BEG", "UT-TIME", "EXPSTART", "UTTIME"} {
		t, ok := findCard(hs, clock)
		if !ok || !strings.Contains(t.value(), ":") {
			continue
		}
		if jd, err := spectrum.ParseUTC(date + "T" + strings.TrimSpace(t.value())); err == nil {
			return jd, true
		}
	}
	return 0, false
}
