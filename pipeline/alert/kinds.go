// Package alert decides what to say and whether to say it, and composes the
// messages. Deciding is a pure function of the state now, what was last said
// and the moment; its answer is a named reason that is stored beside the message.
//
// The package knows no database, queue, logger, socket or clock; the senders
// are alert/mail and alert/webhook.
package alert

import "time"

// A Kind of thing people are told about. How long it must last, what makes it
// moot and how often it is repeated are data, not code.
type Kind struct {
	Code  string
	Title string // for people
	Tells string // which people: a word of the person's tells in the settings
	// Hold is how long it must be present before anybody hears of it.
	Hold time.Duration
	// Clear is how long it must be gone before the all-clear.
	Clear time.Duration
	// Repeat is the pause before a reminder; 0: none.
	Repeat time.Duration
	// Needs lists kinds that make this one moot while they are present for
	// the same instrument or for all: with a blind root nobody hears of missing scans.
	Needs []string
	// Quiet kinds are in the brief only.
	Quiet bool
}

// The codes of the kinds.
const (
	RootBlind       = "root.blind"
	SilentNight     = "night.silent"
	ReferenceUnrun  = "reference.unrun"
	DriftCase       = "drift.case"
	DeliveryFailing = "delivery.failing"
	ClockWrong      = "clock.wrong"
	DiskLow         = "disk.low"
	Backlog         = "work.behind"
	InstrumentShut  = "instrument.closed"
	SetWaiting      = "set.waiting"
)

// Kinds lists all kinds.
func Kinds() []Kind {
	return []Kind{
		{Code: RootBlind, Title: "export folder not visible", Tells: "absence", Hold: 5 * time.Minute, Clear: 2 * time.Minute, Repeat: 12 * time.Hour},
		{Code: SilentNight, Title: "nothing arrives", Tells: "absence", Hold: 0, Clear: 0, Repeat: 12 * time.Hour, Needs: []string{RootBlind}},
		{Code: ReferenceUnrun, Title: "reference not run", Tells: "absence", Hold: 0, Needs: []string{RootBlind, SilentNight}},
		{Code: DriftCase, Title: "measuring system disturbed", Tells: "cases"},
		{Code: InstrumentShut, Title: "instrument closed", Tells: "cases"},
		{Code: DeliveryFailing, Title: "messages cannot be delivered", Tells: "delivery", Hold: 15 * time.Minute, Clear: 5 * time.Minute, Repeat: 12 * time.Hour},
		{Code: ClockWrong, Title: "clock of an instrument is off", Tells: "absence", Hold: 30 * time.Minute, Clear: 30 * time.Minute, Repeat: 24 * time.Hour},
		{Code: DiskLow, Title: "disk nearly full", Tells: "delivery", Hold: 5 * time.Minute, Clear: 10 * time.Minute, Repeat: 6 * time.Hour},
		{Code: Backlog, Title: "work is behind", Tells: "delivery", Hold: time.Hour, Clear: 10 * time.Minute, Repeat: 12 * time.Hour},
		{Code: SetWaiting, Title: "set waits for something", Tells: "absence", Hold: 0, Needs: []string{RootBlind, SilentNight}, Quiet: true},
	}
}

// KindOf finds a kind by its code.
func KindOf(code string) (Kind, bool) {
	for _, k := range Kinds() {
		if k.Code == code {
			return k, true
		}
	}
	return Kind{}, false
}
