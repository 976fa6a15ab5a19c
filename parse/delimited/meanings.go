package delimited

import (
	"strings"
)

// Meanings of the columns of a labelled table.
const (
	colNone = iota
	colRung
	colPosition
	colSample
	colNumber
	colPH
	colNominal
	colMilliVolt
	colTemperature
	colElectrode
	colMeter
	colTime
	colDate
	colClock
	colElapsed
	colSD
	colSlope
	colPoints
	colLot
	colBuffer
	colSet
	colRole
	colCompound
	colDilution
	colIonic
	colCosolvent
	colPercent
	colKind
	colResource
	colInstrument
	colText
	colBy
	colNight
	colSlot
	colWavelength
	colOrdinate
	colPath
	colBandwidth
	colCount
)

// colWords lists the whole folded names of a column, units off (common
// practice, no source).
func colWords(c int) string {
	switch c {
	case colRung:
		return "rung rungs step stufe stufen solution losung solucion palier"
	case colPosition:
		return "position pos vial vial_position well tray_position tray cell_position platz platte_position posicion posizione cuvette_no slot_no tube"
	case colSample:
		return "sample sample_name sample_id label id key probe probenname echantillon muestra campione amostra monster prov name"
	case colNumber:
		return "# no nr number nummer numero index n row zeile"
	case colNominal:
		return "nominal nominal_ph ph_nominal certified certified_ph buffer_ph ph_buffer ph_of_buffer standard_ph sollwert soll_ph ph_soll assigned assigned_ph buffer_value"
	case colPH:
		return "ph ph_value ph_wert phwert ph_reading reading_ph measured_ph ph_measured valeur_ph valor_ph valore_ph"
	case colMilliVolt:
		return "mv e_mv mv_reading reading_mv potential potential_mv emf millivolt millivolts spannung potentiel potencial potenziale"
	case colTemperature:
		return "temperature temp t temperature_c temp_c t_c temperatur temperatura temperatuur lampotila cell_temperature sample_temperature solution_temperature"
	case colElectrode:
		return "electrode electrode_id elektrode electrodo elettrodo eletrodo ph_electrode"
	case colMeter:
		return "meter ph_meter meter_id phmeter phmetre"
	case colTime:
		return "at read_at time_stamp timestamp date_time datetime date_and_time measured measured_at measured_on recorded recorded_at logged logged_at calibrated calibrated_at calibration_time when datum_uhrzeit datum_zeit zeitpunkt date_heure fecha_hora"
	case colDate:
		return "date datum fecha dato pvm"
	case colClock:
		return "time time_of_day uhrzeit zeit heure hora ora tid czas"
	case colElapsed:
		return "elapsed elapsed_time t_s time_s time_min seconds minutes"
	case colSD:
		return "sd s std scatter standard_deviation"
	case colSlope:
		return "slope drift slope_per_min drift_per_min ph_per_min"
	case colPoints:
		return "points readings"
	case colLot:
		return "lot buffer_lot lot_number lot_no lot_nr bottle buffer_bottle charge batch chargennummer ch_b compound_lot"
	case colBuffer:
		return "buffer puffer tampon tampone standard buffer_recipe recipe medium calibration_buffer buffer_name pufferlosung"
	case colSet:
		return "set set_name sample_set series satz"
	case colRole:
		return "role type sample_type what rolle"
	case colCompound:
		return "compound substance dye indicator substanz farbstoff material analyte"
	case colDilution:
		return "dilution dilution_factor verdunnung dil factor"
	case colIonic:
		return "ionic_strength i ionenstarke force_ionique"
	case colCosolvent:
		return "cosolvent co_solvent solvent losungsmittel"
	case colPercent:
		return "cosolvent_pct cosolvent_percent cosolvent_% percent % pct solvent_percent volume_percent vol_%"
	case colKind:
		return "kind event event_kind category art"
	case colResource:
		return "resource thing object item device part"
	case colInstrument:
		return "instrument instrument_name gerat spectrometer photometer"
	case colText:
		return "text note notes comment remark remarks description what_happened bemerkung kommentar"
	case colBy:
		return "by who person operator user signed bediener von"
	case colNight:
		return "night nacht nuit noche"
	case colSlot:
		return "slot bracket turn"
	case colWavelength:
		return "wavelength wave_length wl lambda nm wellenlange longueur_d_onde longitud_de_onda wavelength_nm wavenumber wellenzahl"
	case colPath:
		return "path path_length pathlength schichtdicke"
	case colBandwidth:
		return "bandwidth spectral_bandwidth sbw bandbreite"
	}
	return ""
}

// column tells what the head of a column means, with its unit.
func column(head string) (kind int, unit string) {
	bare, unit := unitOf(head)
	f := fold(bare)
	w := underlined(f)
	if strings.EqualFold(unit, "mV") {
		return colMilliVolt, unit
	}
	for _, c := range lexis().columns[w] {
		switch {
		case (c == colClock || c == colTime || c == colTemperature && w == "t") && timeUnit(unit) > 0:
			return colElapsed, unit
		case c == colElapsed && unit == "":
			if _, u, ok := strings.Cut(w, "_"); ok && timeUnit(u) > 0 {
				unit = u
			} else if timeUnit(w) > 0 {
				unit = w
			}
		case c == colTemperature && w == "t" && unit == "":
			continue
		}
		return c, unit
	}
	switch q := quantity(head); {
	case strings.HasPrefix(f, " ph ") && len(f) < 24 && !strings.Contains(f, "meter"):
		return colPH, unit
	case q == qWavelength:
		return colWavelength, unit
	case ordinate(q) && q != qOther:
		return colOrdinate, unit
	}
	return colNone, unit
}

// timeUnit gives the seconds in a unit of elapsed time, 0 if it is none.
func timeUnit(u string) float64 {
	switch strings.ToLower(strings.TrimSpace(u)) {
	case "s", "sec", "secs", "second", "seconds", "sekunden":
		return 1
	case "min", "mins", "minute", "minutes", "minuten":
		return 60
	case "h", "hour", "hours", "stunden":
		return 3600
	case "ms":
		return 1e-3
	}
	return 0
}
