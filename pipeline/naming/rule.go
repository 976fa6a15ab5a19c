// Package naming sorts paths into sample sets by rules: one rule is an RE2
// pattern with named groups on the path relative to its folder. A path fits
// exactly one rule or it is parked; nothing is dropped.
//
// The package is pure: it knows no file system, database, logger or clock.
package naming

// A Rule is one [[rule]] of the settings.
type Rule struct {
	Name       string            `toml:"name" json:"name"`
	Pattern    string            `toml:"pattern" json:"pattern"`                         // RE2, matched against the normalised relative path
	Column     string            `toml:"column" json:"column,omitempty"`                 // RE2 on scan labels: each trace of a file is an item of its own
	Folders    []string          `toml:"folders" json:"folders,omitempty"`               // names of folders it applies to; empty: all
	Role       string            `toml:"role" json:"role,omitempty"`                     // role when the pattern has no role group or it is empty; default "scan"
	Set        string            `toml:"set" json:"set,omitempty"`                       // template for the set name, e.g. "${compound}-${cosolvent}${percent}"; default "${set}"
	Series     string            `toml:"series" json:"series,omitempty"`                 // template: sets of one series are extrapolated together
	Run        string            `toml:"run" json:"run,omitempty"`                       // template of the run whose sheet says which set stands where; default "${run}"
	Slot       string            `toml:"slot" json:"slot,omitempty"`                     // slot when the pattern has no slot group
	PHPoint    string            `toml:"ph_point" json:"ph_point,omitempty"`             // what stands for the decimal point in a ph group besides "." and ","
	Pair       string            `toml:"pair" json:"pair,omitempty"`                     // how pH finds its scan: "name", "key", "clock", "inside"; default "key"
	PairBy     string            `toml:"pair_by" json:"pair_by,omitempty"`               // group used as key: "rung" (default) or "pos"
	First      int               `toml:"first" json:"first,omitempty"`                   // first index of rungs, 0 or 1, where rows are numbered and not named
	Roles      map[string]string `toml:"roles" json:"roles,omitempty"`                   // words of the role group -> roles of this program ("blk" = "blank", "pht" = "ph")
	DateFormat string            `toml:"date_format" json:"date_format,omitempty"`       // Go layout of the date group when not YYYYMMDD, YYYY-MM-DD or YYMMDD
	CheckDigit string            `toml:"check_digit" json:"check_digit,omitempty"`       // how the check group follows from the digits of the order group (else set): "luhn", "mod10", "mod11", "mod11-remainder"
	Example    []string          `toml:"example" json:"example,omitempty"`               // paths that must match; checked when the settings are read
	ColumnEx   []string          `toml:"column_example" json:"column_example,omitempty"` // labels that must match Column
}

// Roles a file or item can have.
const (
	RoleScan        = "scan"
	RoleBlank       = "blank"
	RolePH          = "ph"
	RoleCalibration = "calibration"
	RoleSheet       = "sheet"
	RoleEvents      = "events"
	RolePlan        = "plan"
	RoleEnd         = "end" // end marker of a set: a file whose appearance says that the set is whole
	RoleIgnore      = "ignore"
)

// A Match is what a rule says about one path (or one column of a file).
type Match struct {
	Rule   string  `json:"rule"`
	Role   string  `json:"role"`
	Set    string  `json:"set,omitempty"`
	Series string  `json:"series,omitempty"`
	Run    string  `json:"run,omitempty"`
	Rung   string  `json:"rung,omitempty"` // as written, leading zeros kept; compare with RungKey
	Rep    string  `json:"rep,omitempty"`
	Pos    string  `json:"pos,omitempty"`
	Slot   string  `json:"slot,omitempty"`
	Inst   string  `json:"inst,omitempty"`
	Date   string  `json:"date,omitempty"`  // YYYY-MM-DD
	Stamp  string  `json:"stamp,omitempty"` // RFC 3339 local time without zone
	Night  string  `json:"night,omitempty"`
	Rev    int     `json:"rev,omitempty"`  // revision or correction order; higher counts
	Copy   bool    `json:"copy,omitempty"` // the name says it is a copy
	PH     float64 `json:"ph,omitempty"`
	HasPH  bool    `json:"has_ph,omitempty"`
	// Columns: the rule sorts the traces of the file one by one; ask MatchColumn with each label.
	Columns    bool              `json:"columns,omitempty"`
	Celsius    float64           `json:"celsius,omitempty"` // of the celsius group
	HasCelsius bool              `json:"has_celsius,omitempty"`
	Percent    float64           `json:"percent,omitempty"` // of the percent group: volume percent of cosolvent
	HasPercent bool              `json:"has_percent,omitempty"`
	Groups     map[string]string `json:"groups,omitempty"` // every named group as captured
}
