package naming

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
