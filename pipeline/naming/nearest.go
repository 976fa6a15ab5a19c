package naming

// A KnownSet is a set that exists, as far as a parked file might belong to it.
type KnownSet struct {
	Folder string   // name of the folder its files came from; "" fits every folder
	Set    string   // as Match.Set
	Rungs  []string // rungs it has
	Roles  []string // roles it has besides scans
	Ladder []string // rungs it ought to have; nil: unknown, then every rung it has not may be lacking
}

// A Suggestion says where a parked file may belong. The zero value is no idea.
type Suggestion struct {
	Rule     string // nearest rule; "" if none is near
	Set      string // set that lacks exactly this; "" if none does
	Role     string
	Rung     string
	Path     string // the path as it probably should read; "" without a set
	Distance int    // characters that differ between the path and Path
	Sentence string // for people, always filled
}

// Nearest says where a parked path may belong: the set that lacks exactly the
// rung or role the path would have after at most two characters are put right,
// else the rule it resembles most. It only suggests; a person adopts.
func Nearest(folder, path string, rules *Rules, known []KnownSet) Suggestion {
	panic("being written")
}

// A Proposal is a rule made from names that were seen.
type Proposal struct {
	Rule   Rule
	Paths  []string // that it covers, as given
	Doubts []string // sentences on what could not be decided from the names
}

// Propose clusters names into patterns with named groups, for a first
// settings file. Paths that resemble nothing come back in a last Proposal
// without a pattern.
func Propose(paths []string) []Proposal { panic("being written") }

// ProposeColumn does for the labels of the traces in one file what Propose
// does for paths: a column pattern, and doubts.
func ProposeColumn(labels []string) (pattern string, doubts []string) { panic("being written") }
