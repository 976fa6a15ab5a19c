package naming

import (
	"errors"
	"strings"
	"testing"
)

// wanted is what a path must mean. Fields that a situation does not name stay empty.
type wanted struct {
	path string
	Match
}

// situation is one way of naming files with its rules, paths that fit and
// paths that must not.
type situation struct {
	name   string
	rules  []Rule
	fits   []wanted
	parked []string
}

// situations are the 16 naming situations of the requirements, with their
// patterns as they stand there.
func situations() []situation {
	return []situation{
		{
			name: "1 all in the name",
			rules: []Rule{{Name: "q", Pair: "name",
				Pattern: `^(?P<set>[A-Z]{2,4}-\d{4})_(?:r(?P<rung>\d{2})_pH(?P<ph>\d{1,2}\.\d{1,3})|(?P<role>blank))\.csv$`}},
			fits: []wanted{
				{"PHR-2207_r03_pH7.41.csv", Match{Set: "PHR-2207", Role: RoleScan, Rung: "03", PH: 7.41, HasPH: true}},
				{"PHR-2207_blank.csv", Match{Set: "PHR-2207", Role: RoleBlank}},
			},
			parked: []string{"PHR-2207_r03.csv", "PHR-227_r03_pH7.41.csv", "PHR-2207_r03_pH7.41.csv.txt", "phr-2207_blank.csv", "PHR-2207_r03_pH17.41.csv"},
		},
		{
			name: "2 p as decimal, replicates",
			rules: []Rule{{Name: "q", PHPoint: "p",
				Pattern: `^(?P<date>\d{8})_(?P<set>[A-Z]{2,4}_L\d+)_(?:(?P<ph>\d{1,2}p\d{1,3})|(?P<role>blk))_(?P<rep>[a-z])\.txt$`}},
			fits: []wanted{
				{"20260311_MCP_L88_7p42_a.txt", Match{Set: "MCP_L88", Role: RoleScan, PH: 7.42, HasPH: true, Rep: "a", Date: "2026-03-11"}},
				{"20260311_MCP_L88_blk_b.txt", Match{Set: "MCP_L88", Role: RoleBlank, Rep: "b", Date: "2026-03-11"}},
			},
			parked: []string{"20261311_MCP_L88_7p42_a.txt", "20260311_MCP_L88_7.42_a.txt", "20260311_MCP_L88_7p42.txt"},
		},
		{
			name: "3 folder per set, table",
			rules: []Rule{{Name: "q", Pair: "key",
				Pattern: `^(?P<date>\d{4}-\d{2}-\d{2})/(?P<set>[A-Z]{2,4}-\d+)/(?:scan_(?P<rung>\d{4})|(?P<role>ph|blank))\.csv$`}},
			fits: []wanted{
				{"2026-03-11/CRR-104/scan_0007.csv", Match{Set: "CRR-104", Role: RoleScan, Rung: "0007", Date: "2026-03-11"}},
				{"2026-03-11/CRR-104/ph.csv", Match{Set: "CRR-104", Role: RolePH, Date: "2026-03-11"}},
				{`2026-03-11\CRR-104\blank.csv`, Match{Set: "CRR-104", Role: RoleBlank, Date: "2026-03-11"}},
				{"./2026-03-11//CRR-104/./ph.csv", Match{Set: "CRR-104", Role: RolePH, Date: "2026-03-11"}},
			},
			parked: []string{"2026-03-11/CRR-104/scan_007.csv", "CRR-104/ph.csv", "2026-03-11/CRR-104/old/ph.csv", "2026-02-30/CRR-104/ph.csv"},
		},
		{
			name: "4 tray position and sequence",
			rules: []Rule{
				{Name: "scan", PairBy: "pos", Pattern: `^(?P<run>S\d+)_(?P<pos>[A-H]\d{2})_(?P<stamp>\d{8}T\d{6})\.csv$`},
				{Name: "tables", Pattern: `^(?P<run>S\d+)_(?P<role>sequence|ph)\.csv$`},
			},
			fits: []wanted{
				{"S118_A05_20260311T214533.csv", Match{Rule: "scan", Run: "S118", Pos: "A05", Role: RoleScan, Stamp: "2026-03-11T21:45:33", Date: "2026-03-11"}},
				{"S118_sequence.csv", Match{Rule: "tables", Run: "S118", Role: RoleSheet}},
				{"S118_ph.csv", Match{Rule: "tables", Run: "S118", Role: RolePH}},
			},
			parked: []string{"S118_J05_20260311T214533.csv", "S118_A05_20260311T254533.csv", "S118_map.csv"},
		},
		{
			name:  "5 plate, one wide file and a map",
			rules: []Rule{{Name: "q", Pattern: `^(?P<run>PLT\d{4})(?:_run(?P<rev>\d+)|_(?P<role>map|ph))\.csv$`}},
			fits: []wanted{
				{"PLT0042_run2.csv", Match{Run: "PLT0042", Role: RoleScan, Rev: 2}},
				{"PLT0042_map.csv", Match{Run: "PLT0042", Role: RoleSheet}},
				{"PLT0042_ph.csv", Match{Run: "PLT0042", Role: RolePH}},
			},
			parked: []string{"PLT0042.csv", "PLT42_run2.csv"},
		},
		{
			name: "6 pH logger by clock",
			rules: []Rule{
				{Name: "scan", Pair: "clock", Pattern: `^(?P<stamp>\d{8}-\d{6})-(?P<set>[A-Z]{2,4}\d{3,5})\.txt$`},
				{Name: "log", Pattern: `^(?P<role>phlog)_(?P<date>\d{8})\.csv$`},
			},
			fits: []wanted{
				{"20260311-214533-TB2219.txt", Match{Rule: "scan", Set: "TB2219", Role: RoleScan, Stamp: "2026-03-11T21:45:33", Date: "2026-03-11"}},
				{"phlog_20260311.csv", Match{Rule: "log", Role: RolePH, Date: "2026-03-11"}},
			},
			parked: []string{"20260311-214533-2219.txt", "phlog_2026-03-11.csv"},
		},
		{
			name: "7 JCAMP-DX blocks",
			rules: []Rule{{Name: "q", Pair: "inside", Set: "${set}-n${night}",
				Pattern: `^(?P<set>RI-[A-Z])_night(?P<night>\d{3})(?:_(?P<rev>\d+))?\.(?:jdx|dx)$`}},
			fits: []wanted{
				{"RI-C_night041.jdx", Match{Set: "RI-C-n041", Role: RoleScan, Night: "041"}},
				{"RI-C_night041_2.dx", Match{Set: "RI-C-n041", Role: RoleScan, Night: "041", Rev: 2}},
			},
			parked: []string{"RI-C_night41.jdx", "RI-C_night041.csv"},
		},
		{
			name: "8 titration run",
			rules: []Rule{{Name: "q", First: 0,
				Pattern: `^TIT_(?P<set>[A-Z]{2}\d{4})(?:_(?P<rung>\d{3})\.csv|\.(?P<role>pht))$`}},
			fits: []wanted{
				{"TIT_TB2219_000.csv", Match{Set: "TB2219", Role: RoleScan, Rung: "000"}},
				{"TIT_TB2219_046.csv", Match{Set: "TB2219", Role: RoleScan, Rung: "046"}},
				{"TIT_TB2219.pht", Match{Set: "TB2219", Role: RolePH}},
			},
			parked: []string{"TIT_TB2219.csv", "TB2219_000.csv"},
		},
		{
			name: "9 references with slot",
			rules: []Rule{{Name: "q", Set: "REF-${ref}-n${night}-${slot}",
				Pattern: `^REF-(?P<ref>[A-Z])_n(?P<night>\d{3})_(?P<slot>open|mid|close)_(?:r(?P<rung>\d{2})|(?P<role>blank|ph))\.csv$`}},
			fits: []wanted{
				{"REF-B_n041_open_r05.csv", Match{Set: "REF-B-n041-open", Role: RoleScan, Rung: "05", Slot: "open", Night: "041"}},
				{"REF-B_n041_close_ph.csv", Match{Set: "REF-B-n041-close", Role: RolePH, Slot: "close", Night: "041"}},
			},
			parked: []string{"REF-B_n041_late_r05.csv", "REF-BB_n041_open_r05.csv"},
		},
		{
			name: "10 two instruments, same names",
			rules: []Rule{{Name: "q", Run: "${inst}-${date}",
				Pattern: `^(?P<inst>U[12])/export/(?P<date>\d{6})/Sample(?P<seq>\d{1,3})\.csv$`}},
			fits: []wanted{
				{"U1/export/260311/Sample12.csv", Match{Inst: "U1", Run: "U1-2026-03-11", Pos: "12", Role: RoleScan, Date: "2026-03-11"}},
				{"U2/export/260311/Sample12.csv", Match{Inst: "U2", Run: "U2-2026-03-11", Pos: "12", Role: RoleScan, Date: "2026-03-11"}},
			},
			parked: []string{"U3/export/260311/Sample12.csv", "U1/export/260311/sample12.csv", "U1/export/261311/Sample12.csv"},
		},
		{
			name: "11 spoken names, comma, copies",
			rules: []Rule{{Name: "q",
				Pattern: `^(?P<set>\p{L}+ Los \d+)[\s\x{00A0}]+[-–][\s\x{00A0}]+pH[\s\x{00A0}]?(?P<ph>\d{1,2},\d{1,3})(?:[\s\x{00A0}]\((?P<copy>\d+)\))?\.csv$`}},
			fits: []wanted{
				{"Kresolrot Los 17 – pH 8,24 (2).csv", Match{Set: "Kresolrot Los 17", Role: RoleScan, PH: 8.24, HasPH: true, Copy: true}},
				{"Kresolrot Los 17 - pH 8,24.csv", Match{Set: "Kresolrot Los 17", Role: RoleScan, PH: 8.24, HasPH: true}},
				{"Kresolrot\u00a0Los\u00a017\u00a0–\u00a0pH\u00a08,24.csv", Match{Set: "Kresolrot Los 17", Role: RoleScan, PH: 8.24, HasPH: true}},
				// The same name as some systems store it: u and the two dots apart.
				{"Gru\u0308n Los 3 – pH 8,24.csv", Match{Set: "Grün Los 3", Role: RoleScan, PH: 8.24, HasPH: true}},
			},
			parked: []string{"Kresolrot Los 17 pH 8,24.csv", "Kresolrot Los 17 – pH 8.24.csv", "Kresolrot Los 17 – pH 8,24 (b).csv"},
		},
		{
			name: "12 corrected files",
			rules: []Rule{{Name: "q",
				Pattern: `^(?P<set>[A-Z]{2}-\d{4})_r(?P<rung>\d{2})(?:_(?:v(?P<rev>\d+)|(?P<fix>corr)))?\.csv$`}},
			fits: []wanted{
				{"TB-2219_r04.csv", Match{Set: "TB-2219", Role: RoleScan, Rung: "04"}},
				{"TB-2219_r04_v1.csv", Match{Set: "TB-2219", Role: RoleScan, Rung: "04", Rev: 1}},
				{"TB-2219_r04_v2.csv", Match{Set: "TB-2219", Role: RoleScan, Rung: "04", Rev: 2}},
				{"TB-2219_r04_corr.csv", Match{Set: "TB-2219", Role: RoleScan, Rung: "04", Rev: RevCorrected}},
			},
			parked: []string{"TB-2219_r04_final.csv", "TB-2219_r4.csv", "TB-2219_r04_v1000000.csv"},
		},
		{
			name: "13 cosolvent series",
			rules: []Rule{{Name: "q", Set: "${compound}-${cosolvent}${percent}", Series: "${compound}",
				Pattern: `^(?P<compound>[A-Z]{2}\d+)_(?P<cosolvent>[MED])(?P<percent>\d{2})_(?:r(?P<rung>\d{2})|(?P<role>blank|ph))\.csv$`}},
			fits: []wanted{
				{"HX31_M40_r06.csv", Match{Set: "HX31-M40", Series: "HX31", Role: RoleScan, Rung: "06", Percent: 40, HasPercent: true}},
				{"HX31_M00_blank.csv", Match{Set: "HX31-M00", Series: "HX31", Role: RoleBlank, HasPercent: true}},
			},
			parked: []string{"HX31_X40_r06.csv", "HX31_r06.csv"},
		},
		{
			name: "14 temperature series",
			rules: []Rule{{Name: "q", Set: "${compound}-T${celsius}", Series: "${compound}",
				Pattern: `^(?P<compound>[A-Z]{2}\d+)_T(?P<celsius>\d{2}(?:\.\d)?)_(?:r(?P<rung>\d{2})|(?P<role>blank|ph))\.csv$`}},
			fits: []wanted{
				{"HX31_T37.5_ph.csv", Match{Set: "HX31-T37.5", Series: "HX31", Role: RolePH, Celsius: 37.5, HasCelsius: true}},
				{"HX31_T25_r01.csv", Match{Set: "HX31-T25", Series: "HX31", Role: RoleScan, Rung: "01", Celsius: 25, HasCelsius: true}},
			},
			parked: []string{"HX31_T5_ph.csv", "HX31_T37,5_ph.csv"},
		},
		{
			name: "15 one growing file per night",
			rules: []Rule{{Name: "q", Pattern: `^night_(?P<date>\d{8})\.csv$`,
				Column: `^(?P<set>[A-Z]{2}-\d{4})\|(?:r(?P<rung>\d{2})\|(?P<ph>\d{1,2}\.\d{2,3})|(?P<role>blank))$`}},
			fits:   []wanted{{"night_20260311.csv", Match{Role: RoleScan, Date: "2026-03-11", Columns: true}}},
			parked: []string{"night_2026031.csv", "Night_20260311.csv"},
		},
		{
			name: "16 order number with check digit",
			rules: []Rule{{Name: "q", Set: "${order}", CheckDigit: "mod11-remainder",
				Pattern: `^(?P<order>Q\d{2}-\d{5})-(?P<check>\d)_(?:R(?P<rung>\d{2})|(?P<role>BL|PH))\.csv$`}},
			fits: []wanted{
				{"Q26-00417-3_R05.csv", Match{Set: "Q26-00417", Role: RoleScan, Rung: "05"}},
				{"Q26-00417-3_BL.csv", Match{Set: "Q26-00417", Role: RoleBlank}},
				{"Q26-00417-3_PH.csv", Match{Set: "Q26-00417", Role: RolePH}},
			},
			parked: []string{"Q26-00417-4_R05.csv", "Q26-00471-3_R05.csv", "Q26-0417-3_R05.csv"},
		},
	}
}

func TestSixteenSituations(t *testing.T) {
	all := situations()
	if len(all) != 16 {
		t.Fatalf("%d situations", len(all))
	}
	for _, s := range all {
		t.Run(s.name, func(t *testing.T) {
			rs, err := Compile(s.rules)
			if err != nil {
				t.Fatal(err)
			}
			for _, w := range s.fits {
				m, err := rs.Match("u1", w.path)
				if err != nil {
					t.Errorf("%v", err)
					continue
				}
				if w.Rule == "" {
					m.Rule = ""
				}
				m.Groups = nil
				if got, want := comparable(m), comparable(w.Match); got != want {
					t.Errorf("%s\n got %+v\nwant %+v", w.path, got, want)
				}
			}
			for _, p := range s.parked {
				if m, err := rs.Match("u1", p); !IsParked(err) {
					t.Errorf("%s ought to be parked, got %+v, %v", p, m, err)
				}
			}
		})
	}
}

// comparable is a Match without its map.
func comparable(m Match) any {
	type flat struct {
		Rule, Role, Set, Series, Run, Rung, Rep, Pos, Slot, Inst, Date, Stamp, Night string
		Rev                                                                          int
		Copy, HasPH, Columns, HasCelsius, HasPercent                                 bool
		PH, Celsius, Percent                                                         float64
	}
	return flat{m.Rule, m.Role, m.Set, m.Series, m.Run, m.Rung, m.Rep, m.Pos, m.Slot, m.Inst, m.Date, m.Stamp, m.Night,
		m.Rev, m.Copy, m.HasPH, m.Columns, m.HasCelsius, m.HasPercent, m.PH, m.Celsius, m.Percent}
}

func TestColumnsOfAGrowingFile(t *testing.T) {
	rs, err := Compile(situations()[14].rules)
	if err != nil {
		t.Fatal(err)
	}
	file, err := rs.Match("u1", "night_20260311.csv")
	if err != nil {
		t.Fatal(err)
	}
	m, err := rs.MatchColumn(file, "TB-2219|r04|8.41")
	if err != nil || m.Set != "TB-2219" || m.Rung != "04" || m.PH != 8.41 || m.Date != "2026-03-11" {
		t.Errorf("got %+v, %v", m, err)
	}
	if m, err := rs.MatchColumn(file, "TB-2219|blank"); err != nil || m.Role != RoleBlank {
		t.Errorf("got %+v, %v", m, err)
	}
	var none *NoRuleError
	if _, err := rs.MatchColumn(file, "TB-2219|8.41"); !errors.As(err, &none) || none.Path != "TB-2219|8.41" {
		t.Errorf("a label that fits not: %v", err)
	}
	var bad *ValueError
	if _, err := rs.MatchColumn(file, "TB-2219|r04|18.41"); !errors.As(err, &bad) || bad.Group != "ph" {
		t.Errorf("an impossible pH: %v", err)
	}
}

func TestTwoRulesNameBoth(t *testing.T) {
	rs, err := Compile([]Rule{
		{Name: "qc", Pattern: `(?P<set>[A-Z]+)_(?P<rung>\d+)\.csv`},
		{Name: "ref", Pattern: `(?P<set>R[A-Z]*)_(?P<rung>\d+)\.csv`},
		{Name: "elsewhere", Pattern: `(?P<set>R[A-Z]*)_(?P<rung>\d+)\.csv`, Folders: []string{"u2"}},
	})
	if err != nil {
		t.Fatal(err)
	}
	var two *TwoRulesError
	if _, err := rs.Match("u1", "RB_1.csv"); !errors.As(err, &two) || strings.Join(two.Rules, ",") != "qc,ref" {
		t.Fatalf("got %v", err)
	}
	if m, err := rs.Match("u1", "QB_1.csv"); err != nil || m.Rule != "qc" {
		t.Fatalf("got %+v, %v", m, err)
	}
}

func TestPrecedenceOfCorrections(t *testing.T) {
	rs, err := Compile(situations()[11].rules)
	if err != nil {
		t.Fatal(err)
	}
	last := -1
	for _, p := range []string{"TB-2219_r04.csv", "TB-2219_r04_v1.csv", "TB-2219_r04_v2.csv", "TB-2219_r04_v10.csv", "TB-2219_r04_corr.csv"} {
		m, err := rs.Match("u1", p)
		if err != nil {
			t.Fatal(err)
		}
		if m.Rev <= last {
			t.Errorf("%s has order %d, not above %d", p, m.Rev, last)
		}
		last = m.Rev
	}
}
