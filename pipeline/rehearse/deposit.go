package rehearse

import "time"

// An Act is what a deposit does.
type Act string

// The acts of a night.
const (
	Write        Act = "write"         // the whole file
	WritePart    Act = "write-part"    // the beginning of a file that a later Write completes: a slow writer
	Rename       Act = "rename"        // From becomes Path within the same folder
	Remove       Act = "remove"        // the file is deleted by somebody else
	Unmount      Act = "unmount"       // the folder looks empty, its marker file included
	Mount        Act = "mount"         // the folder is back with everything it held
	DatabaseAway Act = "database-away" // the database does not answer from now on
	DatabaseBack Act = "database-back" // it answers again
	Sign         Act = "sign"          // a person decides something
)

// A Deposit is one thing that happens in the laboratory, at a moment. The
// deposits of a night cover 17:00 to 17:00 of the next day, local time, and
// are in order of At.
type Deposit struct {
	At      time.Time  // when it happens
	Act     Act        // what happens
	Folder  string     // "U1", "U2", "METERS" or "LOG"; "" for the acts that concern no folder
	Path    string     // slash-separated, relative to the folder
	From    string     // Rename: the name before
	Bytes   []byte     // Write: the whole content; WritePart: its beginning
	ModTime time.Time  // modification time of the file; may lie before At when a share was away
	Sign    *Signature // Sign: the decision
	Note    string     // what this deposit is about, for a person who reads the replay
}

// A Signature is a scripted decision of a named person, as given to
// `pkvigil sign` or `pkvigil adopt`. Verbs and their objects:
//
//	release      "night:2026-09-14": every result of that night that stands
//	baseline     "U1/*", "U2/*": the baselines of an instrument; "RI-C2": of a reference
//	acknowledge  "E-31", "U1", "CB-207": the open case on that resource
//	accept       "CB-207": the correction proposed for that bottle; "U1/CR-1880.n055": the exchange proposed for that set
//	confirm      "CB-207": results proposed as unaffected by the case on that resource
//	adopt        a set key, with File and Rung: a parked file belongs to that set
type Signature struct {
	Verb    string
	Object  string
	File    string // adopt: folder/path of the parked file
	Rung    string // adopt: the rung it is, "" if it is no scan
	As      string // who
	Because string // why
}
