package rehearse

import "time"

// episodes writes down the disturbances and absences that begin in a night.
func (m *nightMaker) episodes() {
	switch m.night {
	case nightDrift:
		m.tell(Truth{
			Key: "drift.electrode", Kind: KindEpisode, Resource: "E-31", Resources: []string{instOne}, Cause: string(ElectrodeSlope),
			Accept: []string{"electrode.aged", "electrode.slope", "electrode.offset", "electrode.lag"},
			From:   nightDrift + 1, To: nightReplaced - 1, Size: -0.15, Unit: "% slope per night", Expect: ExpectCase,
			Note: "offset +0.003 per night besides; from night 22 on -0.22 % and +0.004 after each calibration",
		})
	case nightRefill:
		m.tell(Truth{
			Key: "ageing.electrode", Kind: KindEpisode, Resource: "E-31", Resources: []string{instOne}, Cause: string(ElectrodeAgeing),
			Accept: []string{"electrode.ageing"}, From: nightRefill, To: nightReplaced - 1, Size: -1, Unit: "%", Expect: ExpectNothing,
			Note: "the calibration sees slope -1 % and potential -4 mV and takes them out",
		})
	case nightReplaced:
		m.tell(Truth{
			Key: "new.electrode", Kind: KindEpisode, Resource: "E-35", Resources: []string{instOne}, Cause: string(ElectrodeAgeing),
			Accept: []string{"electrode.ageing"}, From: nightReplaced, To: nightReplaced + 2, Expect: ExpectNothing,
			Note: "another electrode has another slope and potential",
		})
	case nightLamp:
		m.tell(Truth{
			Key: "scale.lamp", Kind: KindEpisode, Resource: instOne, Resources: []string{"L-13", "L-12"}, Cause: string(ScaleShift),
			Accept: []string{"wavelength"}, From: nightLamp, To: nightRealigned - 1, Size: scaleOff, Unit: "nm", Expect: ExpectCase,
			Note: "pKa not concerned; noise times 0.7",
		})
	case nightBadBuffer:
		m.tell(Truth{
			Key: "buffer.lot", Kind: KindEpisode, Resource: "CB-207", Cause: string(BufferHigh), Accept: []string{"buffer.high"},
			From: nightBadBuffer, To: nightGoodBuffer - 1, Size: badBuffer, Unit: "pH", Expect: ExpectCase, Note: "both instruments",
		})
	case nightUnmounted:
		m.tell(Truth{Key: "share.gone", Kind: KindAbsence, Resource: instTwo, From: m.night, To: m.night, Expect: ExpectAbsence, Note: "01:12 to 04:40"})
	case nightDatabase:
		m.tell(Truth{Key: "db.down", Kind: KindAbsence, From: m.night, To: m.night, Expect: ExpectNothing, Note: "01:00 to 02:30; nothing may be lost"})
	case nightSilent:
		m.tell(Truth{Key: "night.silent", Kind: KindAbsence, Resource: instOne, From: m.night, To: m.night, Expect: ExpectAbsence, Note: "method not started"})
	}
}

// harm is how far the pH side of an episode displaces the pKa of a booked set,
// and the thing to blame, by the equations of straight-line calibrations: an
// offset moves pKa by itself, a slope by its relative size times pKa-7, a
// buffer by minus its weight at the pKa times its error.
func (s *Story) harm(b Booking) (float64, string) {
	pka := s.dyes[b.Dye].PKa[0]
	offset, eps := s.ageing(b.Instrument, b.Night, b.Begin.Add(13*time.Minute))
	if offset != 0 || eps != 0 {
		return offset + eps*(pka-7), electrodeOf(b.Instrument, b.Night)
	}
	if b.Night >= nightBadBuffer && b.Night < nightGoodBuffer {
		_, c := s.electrodeAt(b.Instrument, s.lastCalibration(b.Instrument, b.Night))
		w := c.Weights(pka)
		return -w[len(w)-1] * badBuffer, "CB-207"
	}
	return 0, ""
}

// TruthOf is what is true of one night.
func (s *Story) TruthOf(night int) []Truth { return s.play(night, true).truth }

// Truth is what is true of all nights, in order.
func (s *Story) Truth() []Truth {
	var out []Truth
	for n := 1; n <= storyNights; n++ {
		out = append(out, s.TruthOf(n)...)
	}
	return out
}
