package rehearse

import (
	"fmt"
	"slices"
	"time"
)

// Instruments of the story.
const (
	instOne = "U1" // autosampler with flow cell
	instTwo = "U2" // cuvette changer
)

// A Booking is one set as planned in the evening.
type Booking struct {
	Night      int
	Instrument string
	Set        string // name without instrument, as the naming rules will make it
	Stem       string // folder and beginning of the file names
	Compound   string // name in the settings
	Dye        string // key of Dyes
	Lot        string
	Slot       string // "open", "close" or ""
	Reference  bool
	Begin      time.Time
}

// Key is the set's name with its instrument.
func (b Booking) Key() string { return b.Instrument + "/" + b.Set }

// Nights of the story in which something is scripted.
const (
	nightBubble      = 3  // bubble in reference RI-B
	nightLatePH      = 9  // pH table five hours late
	nightShift       = 11 // table one row late
	nightDrift       = 15 // electrode E-31 begins to drift
	nightRefill      = 22 // it is refilled and calibrated, and drifts faster
	nightUnmounted   = 24 // share of U2 away
	nightReplaced    = 28 // electrode E-35 instead of E-31
	nightTidied      = 31 // an old set is deleted from the share
	nightLamp        = 34 // new lamp in U1, scale off
	nightRealigned   = 37 // wavelength scale adjusted
	nightClock       = 41 // clocks go back
	nightBadBuffer   = 41 // bottle CB-207
	nightGoodBuffer  = 46 // bottle CB-208
	nightNewLot      = 48 // new lot of RI-C
	nightOldLotEnds  = 52 // last night of the old lot
	nightImpureFirst = 50 // thymol blue lot TB-2219
	nightImpureLast  = 53
	nightExchange    = 55 // labels exchanged in a cresol red set
	nightDatabase    = 57 // database away
	nightSilent      = 59 // nothing from U1
)

// impureLot is the lot with a second dye in it.
const impureLot = "TB-2219"

// Bookings is the plan of a night, both instruments, in order of time.
func (s *Story) Bookings(night int) []Booking {
	rng := dice(s.seed, "bookings", night)
	samples := 6 + rng.IntN(9)
	one := (samples*3 + 2) / 5
	out := s.instrumentPlan(night, instOne, one, func(i int) string { return s.lot(night, instOne, i, rng.Float64()) })
	out = append(out, s.instrumentPlan(night, instTwo, samples-one, func(i int) string { return s.lot(night, instTwo, i, rng.Float64()) })...)
	slices.SortStableFunc(out, func(a, b Booking) int { return a.Begin.Compare(b.Begin) })
	return out
}

// instrumentPlan lays out one instrument's night: references first, samples
// evenly over the night, references last.
func (s *Story) instrumentPlan(night int, inst string, samples int, lot func(i int) string) []Booking {
	evening := s.at(night, 18, 0)
	var out []Booking
	add := func(b Booking, after time.Duration) {
		b.Night, b.Instrument, b.Begin = night, inst, evening.Add(after)
		out = append(out, b)
	}
	open, closing := s.references(night, inst)
	minutes := 5.0
	if inst == instTwo {
		minutes = 10
	}
	for _, r := range open {
		add(reference(night, r, "open"), time.Duration(minutes*float64(time.Minute)))
		minutes += 31
	}
	const last = 640.0 // minutes: closing references begin
	span := last - minutes - 5
	for i := 0; i < samples; i++ {
		at := minutes + 5 + span*float64(i)/float64(samples)
		add(sample(night, lot(i)), time.Duration(at*float64(time.Minute)).Truncate(time.Minute))
	}
	for i, r := range closing {
		add(reference(night, r, "close"), time.Duration((last+31*float64(i))*float64(time.Minute)))
	}
	return out
}

// references are the reference dyes of an instrument, opening and closing.
func (s *Story) references(night int, inst string) (open, closing []string) {
	purple := "RI-C"
	if night > nightOldLotEnds {
		purple = "RI-C2"
	}
	if inst == instOne {
		open, closing = []string{"RI-A", "RI-B", purple}, []string{purple, "RI-A"}
	} else {
		open, closing = []string{"RI-A", purple}, []string{purple}
		if s.day(night).Weekday() == time.Wednesday {
			open = append(open, "RI-D")
		}
	}
	if night >= nightNewLot && night <= nightOldLotEnds {
		open = append(open, "RI-C2")
	}
	return open, closing
}

func reference(night int, name, slot string) Booking {
	dye := name
	lots := map[string]string{"RI-A": "RA-07", "RI-B": "RB-04", "RI-C": "RC-11", "RI-C2": "RC-12", "RI-D": "RD-02"}
	if name == "RI-C2" {
		dye = "RI-C"
	}
	return Booking{
		Set: name + "." + slot + "." + nightTag(night), Stem: nightTag(night) + "/" + name + "." + slot,
		Compound: name, Dye: dye, Lot: lots[name], Slot: slot, Reference: true,
	}
}

func sample(night int, lot string) Booking {
	dye := lot[:len(lot)-5]
	return Booking{
		Set: lot + "." + nightTag(night), Stem: nightTag(night) + "/" + lot,
		Compound: sampleCompounds()[dye], Dye: dye, Lot: lot,
	}
}

// sampleCompounds are the names the settings give the products.
func sampleCompounds() map[string]string {
	return map[string]string{
		"BCP": "bromocresol purple", "PR": "phenol red", "CR": "cresol red",
		"TB": "thymol blue", "BCG": "bromocresol green",
	}
}

// lot names the i-th sample of an instrument; u chooses the product.
func (s *Story) lot(night int, inst string, i int, u float64) string {
	number := 1000 + 16*night + i
	if inst == instTwo {
		number += 9
	}
	switch {
	case i == 0 && night >= nightImpureFirst && night <= nightImpureLast && (inst == instOne) == (night%2 == 0):
		return impureLot
	case i == 0 && night == nightShift && inst == instOne:
		return fmt.Sprintf("PR-%04d", number)
	case i == 0 && night == nightExchange && inst == instOne:
		return fmt.Sprintf("CR-%04d", number)
	case i == 0 && night == nightLatePH && inst == instOne:
		return fmt.Sprintf("BCP-%04d", number)
	}
	products := []struct {
		name string
		upTo float64
	}{{"BCP", 0.13}, {"BCG", 0.25}, {"PR", 0.51}, {"CR", 0.78}, {"TB", 1.01}}
	for _, p := range products {
		if u < p.upTo {
			return fmt.Sprintf("%s-%04d", p.name, number)
		}
	}
	return fmt.Sprintf("CR-%04d", number)
}
