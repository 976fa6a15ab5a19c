package naming

import (
	"fmt"
	"strings"
)

// A NoRuleError says that a path fits no rule. The file is parked.
type NoRuleError struct {
	Folder string // name of the folder in the settings
	Path   string // normalised
}

// Error gives one sentence.
func (e *NoRuleError) Error() string {
	return fmt.Sprintf("%q in folder %s fits no naming rule", e.Path, e.Folder)
}

// A TwoRulesError says that a path fits more than one rule. The file is parked.
type TwoRulesError struct {
	Folder string
	Path   string
	Rules  []string // names of all rules it fits, in the order of the settings
}

// Error gives one sentence.
func (e *TwoRulesError) Error() string {
	q := make([]string, len(e.Rules))
	for i, r := range e.Rules {
		q[i] = fmt.Sprintf("%q", r)
	}
	return fmt.Sprintf("%q in folder %s fits rules %s; make one of them narrower", e.Path, e.Folder, strings.Join(q, " and "))
}

// A ValueError says that a path fits a rule but one of its groups holds
// something that cannot be what the group says. The file is parked.
type ValueError struct {
	Folder   string
	Path     string
	Rule     string
	Group    string // name of the group
	Found    string
	Expected string
	Remedy   string // what to do, may be empty
}

// Error gives one sentence.
func (e *ValueError) Error() string {
	s := fmt.Sprintf("%q in folder %s fits rule %q, but its %s group reads %q, expected %s",
		e.Path, e.Folder, e.Rule, e.Group, e.Found, e.Expected)
	if e.Remedy != "" {
		s += "; " + e.Remedy
	}
	return s
}

// A RuleError says what is wrong with one rule of the settings.
type RuleError struct {
	Index    int    // position in the list given to Compile, 0-based
	Rule     string // its name
	Key      string // key of the settings: "pattern", "role", ...
	Found    string
	Expected string
	Example  string // a right value, may be empty
	Err      error  // cause, may be nil
}

// Error gives one sentence.
func (e *RuleError) Error() string {
	s := fmt.Sprintf("rule %q: %s = %q, expected %s", e.Rule, e.Key, e.Found, e.Expected)
	if e.Err != nil {
		s += fmt.Sprintf(" (%v)", e.Err)
	}
	if e.Example != "" {
		s += fmt.Sprintf("; for example %s", e.Example)
	}
	return s
}

// Unwrap returns the cause.
func (e *RuleError) Unwrap() error { return e.Err }
