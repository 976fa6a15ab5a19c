package rehearse

import (
	"fmt"
	"time"
	_ "time/tzdata" // the story needs its zone on machines without a zone database
)

// A Story is the invented Quillmere Indicator Works over sixty nights. Night 1
// begins on Monday 14 September 2026; the clocks go back in night 41, the
// Saturday nearest night 40. Nothing in it is drawn in sequence, so any night
// can be made alone and always comes out the same.
type Story struct {
	seed uint64
	zone *time.Location
	dyes map[string]Dye
}

// storyNights is how long the story lasts.
const storyNights = 60

// NewStory prepares the story; equal seeds give equal bytes.
func NewStory(seed uint64) *Story {
	zone, err := time.LoadLocation("Europe/Vienna")
	if err != nil {
		panic("rehearse: embedded zone database lacks Europe/Vienna: " + err.Error())
	}
	return &Story{seed: seed, zone: zone, dyes: Dyes()}
}

// Nights is the number of nights.
func (s *Story) Nights() int { return storyNights }

// Start is 00:00 local time of the day on which night 1 begins.
func (s *Story) Start() time.Time { return s.day(1) }

// Zone is the laboratory's time zone.
func (s *Story) Zone() *time.Location { return s.zone }

// day is 00:00 local time of the day on which a night begins.
func (s *Story) day(night int) time.Time {
	return time.Date(2026, time.September, 13+night, 0, 0, 0, 0, s.zone)
}

// at is a local clock time of a night: hours from 18 count on its first day,
// smaller ones on the day after. In the repeated hour of the clock change the
// first pass is meant.
func (s *Story) at(night, hour, minute int) time.Time {
	d := 13 + night
	if hour < 17 {
		d++
	}
	return time.Date(2026, time.September, d, hour, minute, 0, 0, s.zone)
}

// Date is the date on which a night begins, as YYYY-MM-DD.
func (s *Story) Date(night int) string { return s.day(night).Format(time.DateOnly) }

// NightOf is the number of the night a moment belongs to (17:00 to 17:00).
func (s *Story) NightOf(t time.Time) int {
	l := t.In(s.zone)
	d := time.Date(l.Year(), l.Month(), l.Day(), 0, 0, 0, 0, time.UTC)
	n := int(d.Sub(time.Date(2026, time.September, 13, 0, 0, 0, 0, time.UTC)).Hours() / 24)
	if l.Hour() < 17 {
		n--
	}
	return n
}

func nightTag(night int) string { return fmt.Sprintf("n%03d", night) }
