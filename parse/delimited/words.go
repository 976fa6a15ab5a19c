package delimited

import (
	"strings"
	"unicode"
	"unicode/utf8"

	"golang.org/x/text/unicode/norm"

	"pkvigil/parse"
)

// Quantities a column can hold.
const (
	qUnknown       = ""
	qAbsorbance    = "absorbance"
	qMilli         = "milliabsorbance"
	qTransmittance = "transmittance"
	qPercent       = "percent transmittance"
	qOther         = "other" // a known quantity that is no absorbance
	qWavelength    = "wavelength"
	qTime          = "time"
)

// Units of a wavelength axis.
const (
	unitNM       = "nm"
	unitUM       = "um"
	unitAngstrom = "angstrom"
	unitPerCM    = "1/cm"
)

// fold makes words comparable: lower case, accents off, everything but
// letters, digits, per cent and number sign a blank, one blank at each end.
func fold(s string) string {
	var room [128]byte
	if out, ok := foldASCII(s, room[:]); ok {
		return string(out)
	}
	var b strings.Builder
	b.WriteByte(' ')
	gap := true
	for _, r := range norm.NFD.String(s) {
		switch {
		case unicode.Is(unicode.Mn, r):
			continue
		case unicode.IsLetter(r), unicode.IsDigit(r), r == '%', r == '#':
			b.WriteRune(unicode.ToLower(r))
			gap = false
			continue
		}
		if !gap {
			b.WriteByte(' ')
			gap = true
		}
	}
	if !gap {
		b.WriteByte(' ')
	}
	return b.String()
}

// says tells whether folded text holds one of the words, each a blank-separated list.
func says(folded, words string) bool {
	for w := range strings.FieldsSeq(words) {
		if strings.Contains(folded, " "+strings.ReplaceAll(w, "_", " ")+" ") {
			return true
		}
	}
	return false
}

// holds is says for scripts written without blanks.
func holds(folded, parts string) bool {
	for p := range strings.FieldsSeq(parts) {
		if strings.Contains(folded, p) {
			return true
		}
	}
	return false
}

// The words of several languages for what heads a column are common practice,
// without a source; an underline stands for a blank.
const (
	wordsWavenumber    = "wavenumber wavenumbers wave_number wellenzahl wellenzahlen nombre_d_onde numero_d_onda numero_de_onda liczba_falowa golfgetal vagtal"
	wordsWavelength    = "wavelength wavelengths wave_length wave wl lambda λ nm wellenlange wellenlaenge longueur_d_onde longueur onde longitud_de_onda onda golflengte vaglangd bolgelengde bølgelængde bølgelengde aallonpituus dlugosc_fali fali vlnova_delka hullamhossz dalga_boyu волны nanometer nanometers nanometre nanometres"
	wordsAbsorbance    = "absorbance absorbances abs absorb absorbanz extinktion extinction absorbancia absorvancia absorbancja absorbancji assorbanza absorbantie absorptie absorbans absorbanssi optical_density od au поглощение плотность"
	wordsMilli         = "mau mabs milliabsorbance"
	wordsTransmittance = "transmittance transmission transmitance transmittanz transmitancia trasmittanza trasmissione transmitancja transmittans transmissie transmissio пропускание пропускания"
	wordsOther         = "reflectance reflectancia reflectivity reflexion reflection reflexionsgrad remission riflettanza irradiance radiance fluorescence fluoreszenz emission intensity intensities intensitat intensitaet intensite intensidad counts count cts scope raw signal energy energie volume volumen conductivity potential dark reference ref"
	wordsTime          = "time zeit temps tiempo tempo tijd tid czas время elapsed seconds second minutes minute sec min s hours zeitpunkt"
	wordsPercent       = "% percent prozent pct pourcent"
	wordsNM            = "nm nanometer nanometers nanometre nanometres"
	wordsUM            = "um µm μm micrometer micrometers micrometre micron microns mikrometer"
	wordsAngstrom      = "angstrom angstroms angstroem"
)

// quantity tells what the head of a column, with its unit, says it holds.
// Single letters are left to the caller.
func quantity(head string) string {
	f := fold(head)
	bits := lexis().senses(f)
	foreign := !ascii(head)
	switch {
	case perCM(head), bits&senseWavenumber != 0, foreign && holds(f, "波数"):
		return qWavelength
	case bits&senseMilli != 0:
		return qMilli
	case strings.IndexByte(f, '%') >= 0 && percentT(head):
		return qPercent
	case bits&senseTransmittance != 0, foreign && holds(f, "透过率 透射率 透光率"):
		if bits&sensePercent != 0 || strings.IndexByte(f, '%') >= 0 {
			return qPercent
		}
		return qTransmittance
	case bits&senseAbsorbance != 0, foreign && holds(f, "吸光度"):
		return qAbsorbance
	case bits&senseOther != 0:
		return qOther
	case bits&senseWavelength != 0, foreign && (holds(f, "波长 波長") || strings.ContainsAny(head, "ÅÅ")):
		return qWavelength
	case bits&senseTime != 0, foreign && holds(f, "时间 時間"):
		return qTime
	}
	return qUnknown
}

func percentT(head string) bool {
	lower := strings.ToLower(head)
	return strings.Contains(lower, "%t") || strings.Contains(lower, "% t") || strings.Contains(lower, "t%") || strings.Contains(fold(head), " t % ")
}

func ascii(s string) bool {
	for i := range len(s) {
		if s[i] >= utf8.RuneSelf {
			return false
		}
	}
	return true
}

// mere tells whether a head names nothing but a quantity and its unit, so that
// it cannot serve as the name of a trace.
func mere(head string) bool {
	f := strings.Fields(fold(head))
	if len(f) > 3 {
		return false
	}
	for _, w := range f {
		if quantity(w) == qUnknown && !oneOf(w, "a t y u arb units "+wordsPercent) {
			return false
		}
	}
	return true
}

// perCM tells whether text states the unit of a wavenumber.
func perCM(head string) bool {
	if !strings.Contains(head, "cm") && !strings.Contains(head, "CM") {
		return false
	}
	lower := strings.ToLower(head)
	for _, u := range [...]string{"cm-1", "cm^-1", "cm⁻¹", "1/cm", "cm−1", "cm**-1"} {
		if strings.Contains(lower, u) {
			return true
		}
	}
	return false
}

// axisUnit finds the unit of a wavelength axis in the head of its column or
// the cell of a units row; "" where none is stated.
func axisUnit(head string) string {
	bits := lexis().senses(fold(head))
	switch {
	case perCM(head):
		return unitPerCM
	case bits&senseNM != 0:
		return unitNM
	case bits&senseUM != 0:
		return unitUM
	case bits&senseAngstrom != 0, !ascii(head) && strings.ContainsAny(norm.NFC.String(head), "Åå"):
		return unitAngstrom
	}
	return ""
}

// Keys of a header that the reader understands.
const (
	keySample = iota + 1
	keyMeasured
	keyDate
	keyClock
	keyPath
	keyTemperature
	keyBandwidth
	keyInstrument
	keyPH
	keyMode
	keyPoints
	keyFirst
	keyLast
	keyElectrode
	keyMeter
	keyMilliVolt
	keyAxis
	keyTitle
	keyCount
)

// headerWords lists the whole keys, folded and without unit, blanks as underlines.
func headerWords(key int) string {
	switch key {
	case keySample:
		return "sample sample_name sample_id sample_title probe probenname probenbezeichnung echantillon nom_de_l_echantillon muestra campione amostra monster prov probka vzorek образец"
	case keyMeasured:
		return "measured measured_at measured_on acquired acquired_at date_time datetime date_and_time timestamp time_stamp scan_time scanned scanned_at datum_zeit datum_uhrzeit date_heure fecha_hora recorded recorded_at calibrated calibrated_at calibration_time kalibriert read_at created start_time"
	case keyDate:
		return "date datum fecha data_di_misura dato pvm дата jour messdatum measurement_date scan_date date_measured"
	case keyClock:
		return "time time_of_day uhrzeit zeit heure hora ora tid czas время klockslag messzeit measurement_time"
	case keyPath:
		return "path path_length pathlength optical_path optical_path_length cell_path cell_length cell_path_length cuvette_length schichtdicke kuvettenlange trajet_optique longueur_du_trajet_optique paso_optico camino_optico cammino_ottico caminho_otico weglengte"
	case keyTemperature:
		return "temperature temp cell_temperature sample_temperature cuvette_temperature solution_temperature temperatur messtemperatur probentemperatur temperatura temperatuur lampotila t_cell t_sample t"
	case keyBandwidth:
		return "bandwidth spectral_bandwidth sbw slit slit_width slitwidth bandbreite spektrale_bandbreite spaltbreite bande_passante ancho_de_banda larghezza_di_banda"
	case keyInstrument:
		return "instrument instrument_name instrument_id spectrometer spectrophotometer photometer spektrometer spektralphotometer photometer_name gerat messgerat appareil spectrometre instrumento equipo strumento apparaat"
	case keyPH:
		return "ph ph_value ph_wert"
	case keyMode:
		return "technique mode data_mode measurement_mode measuring_mode photometric_mode y_axis y_mode y_unit y_units yunits ordinate ordinate_mode quantity data_type datatype messmodus messart messgrosse betriebsart modus mode_de_mesure modo modo_de_medida modalita"
	case keyPoints:
		return "points data_points number_of_points number_of_data_points no_of_points npoints n_points number_of_pixels_in_spectrum number_of_pixels_in_file number_of_pixels_in_processed_spectrum anzahl_punkte anzahl_der_punkte messpunkte anzahl_messpunkte nombre_de_points numero_de_puntos numero_di_punti"
	case keyFirst:
		return "start start_wavelength wavelength_start first_wavelength from startwellenlange anfang longueur_d_onde_initiale"
	case keyLast:
		return "end end_wavelength wavelength_end last_wavelength stop stop_wavelength to endwellenlange ende longueur_d_onde_finale"
	case keyElectrode:
		return "electrode electrode_id electrode_name probe_id ph_electrode elektrode electrodo elettrodo eletrodo sensor"
	case keyMeter:
		return "meter ph_meter meter_id phmeter ph_messgerat phmetre phmetro"
	case keyMilliVolt:
		return "mv e potential emf millivolt spannung reading_mv potentiel potencial"
	case keyTitle:
		return "title name label id description titel bezeichnung nombre_de_archivo nom titre titolo"
	case keyAxis:
		return "x_axis x_axis_mode xaxis xaxis_mode x_unit x_units xunits x_mode abscissa abszisse x_achse"
	}
	return ""
}

// headerKey tells what a header key means; 0 where it is not known.
func headerKey(key string) int {
	name, _ := unitOf(key)
	return lexis().keys[underlined(fold(name))]
}

// oneOf tells whether w is one of the words.
func oneOf(w, words string) bool {
	for x := range strings.FieldsSeq(words) {
		if x == w {
			return true
		}
	}
	return false
}

// unitOf takes a unit in brackets, or after a slash, off a name.
func unitOf(name string) (bare, unit string) {
	name = strings.TrimSpace(name)
	for _, pair := range []string{"()", "[]"} {
		i := strings.IndexByte(name, pair[0])
		if i <= 0 {
			continue
		}
		j := strings.IndexByte(name[i:], pair[1])
		if j < 0 {
			continue
		}
		return strings.TrimSpace(name[:i] + " " + name[i+j+1:]), strings.TrimSpace(name[i+1 : i+j])
	}
	if i := strings.LastIndex(name, "/"); i > 0 && len(name)-i <= 6 && len(name)-i > 1 {
		if u := strings.TrimSpace(name[i+1:]); isUnit(u) {
			return strings.TrimSpace(name[:i]), u
		}
	}
	return name, ""
}

// isUnit tells whether a short word is one of the units met in these files.
func isUnit(u string) bool {
	switch strings.ToLower(norm.NFKC.String(u)) {
	case "nm", "mv", "v", "mm", "cm", "°c", "c", "k", "s", "min", "h", "sec", "mol/l", "mm/l", "m", "%", "um", "μm", "au", "mau", "abs":
		return true
	}
	return false
}

// millimetres gives the factor from a length unit to millimetres; 0 if unknown.
func millimetres(unit string) float64 {
	switch strings.ToLower(strings.TrimSpace(unit)) {
	case "mm", "millimeter", "millimetre", "millimeters", "millimetres":
		return 1
	case "cm", "centimeter", "centimetre", "centimeters", "centimetres":
		return 10
	case "um", "µm", "μm":
		return 1e-3
	case "m":
		return 1000
	}
	return 0
}

// numberIn reads a header value such as "25.0", "25,0 °C" or "10 mm": the
// number and what follows it.
func numberIn(value string, point byte) (v float64, rest string, ok bool) {
	b := []byte(strings.TrimSpace(value))
	v, _, n := parse.Prefix(b, point)
	if n == 0 {
		return 0, "", false
	}
	tail := b[n:]
	if len(tail) > 0 && (tail[0] == ',' || tail[0] == '.') {
		other := byte('.' + ',' - point)
		if tail[0] == other {
			if v, _, n = parse.Prefix(b, other); n > 0 {
				tail = b[n:]
			}
		}
	}
	return v, strings.TrimSpace(string(tail)), true
}
