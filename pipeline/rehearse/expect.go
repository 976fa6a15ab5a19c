package rehearse

import "slices"

// expectations say what the program ought to make of each fault, by the
// reactions of the failure catalogue. Faults that are not listed ask for a
// note at least.
func expectations() map[string]string {
	return map[string]string{
		"scan.spike": ExpectNothing, "scan.doubleblank": ExpectHeld, "scan.saturated": ExpectHeld,
		"name.swap2": ExpectHeld, "name.shift1": ExpectHeld, "name.noblank": ExpectWaiting,
		"name.phrows": ExpectWaiting, "name.missing": ExpectWaiting, "ph.mV": ExpectHeld,
		"ph.junction": ExpectHeld, "chem.nolimits": ExpectHeld, "chem.mixedI": ExpectNothing,
		"ph.twoelec": ExpectNothing, "scan.step": ExpectNothing, "file.smoothed": ExpectNoted,
		"scan.platerow": ExpectNoted, "scan.fade": ExpectNothing, "scan.evap": ExpectNothing, "scan.warmup": ExpectNothing,
		"scan.fringe": ExpectNothing, "chem.none": ExpectHeld, "chem.thermo": ExpectHeld, "chem.complex": ExpectHeld,
		"chem.slow": ExpectNoted, "ph.atc": ExpectNothing, "name.blankdye": ExpectNothing,

		"file.cut": ExpectRefused, "file.empty": ExpectRefused, "file.comma": ExpectNothing,
		"file.encoding": ExpectNothing, "file.sentinel": ExpectNothing, "file.otherkind": ExpectRefused,
		"file.multi": ExpectRefused, "file.mislabelled": ExpectRefused, "file.copy": ExpectTwin,
		"file.normform": ExpectNothing, "file.litter": ExpectNothing, "file.spreadsheet": ExpectWaiting,
		"name.typo": ExpectParked, "name.role": ExpectWaiting, "name.blankwrong": ExpectParked,
		"name.interleaved": ExpectParked, "name.restart": ExpectRevised, "clock.skew": ExpectNothing,
		"clock.reset": ExpectNothing, "ph.garbled": ExpectWaiting, "name.phlate": ExpectLate,
	}
}

// ExpectationOf is what the program ought to make of a fault.
func ExpectationOf(key string) string {
	if e, ok := expectations()[key]; ok {
		return e
	}
	return ExpectNoted
}

// TruthOf is what is true of one night of a scenario whose files are written
// in a style: the constants of every set, the faults, and the causes that
// begin.
func (sc *Scenario) TruthOf(night int, st Style) ([]Truth, error) {
	sets, err := sc.Night(night)
	if err != nil {
		return nil, err
	}
	struck := len(sc.Faults[night])+len(sc.FileFaults[night]) > 0
	var out []Truth
	for i, s := range sets {
		clean := i > 0 || !struck
		for _, c := range sc.Causes {
			clean = clean && c.at(night, sc.calibrated(night)) == 0
		}
		out = append(out, Truth{Night: night, Key: "set.pka", Kind: KindPKa, Set: s.Key(), Compound: s.Compound, PKa: s.PKa, Clean: clean})
	}
	for _, f := range sc.Faults[night] {
		out = append(out, Truth{Night: night, Key: f.Key, Kind: KindSet, Set: sets[0].Key(), Size: f.Size,
			Expect: ExpectationOf(f.Key), Note: "rung " + rungKey(f.Rung+1)})
	}
	files, err := sc.fileTruth(night, sets, st)
	if err != nil {
		return nil, err
	}
	return append(append(out, files...), sc.causesFrom(night)...), nil
}

// fileTruth names the file that each fault of files strikes, as it is called afterwards.
func (sc *Scenario) fileTruth(night int, sets []*Set, st Style) ([]Truth, error) {
	if len(sc.FileFaults[night]) == 0 {
		return nil, nil
	}
	var out []Truth
	before := Files(sets[0], st)
	for _, f := range sc.FileFaults[night] {
		after, err := SpoilFiles(before, f, dice(sc.Seed, "files", night, f.Key))
		if err != nil {
			return nil, err
		}
		t := Truth{Night: night, Key: f.Key, Kind: KindFile, Set: sets[0].Key(), Size: f.Size, Expect: ExpectationOf(f.Key)}
		switch t.Expect {
		case ExpectWaiting, ExpectLate, ExpectRevised, ExpectNoted, ExpectHeld:
			t.Kind = KindSet
		}
		for i, a := range after {
			if i >= len(before) || a.Path != before[i].Path || string(a.Bytes) != string(before[i].Bytes) {
				t.File = sets[0].Instrument + "/" + a.Path
				break
			}
		}
		out = append(out, t)
		before = after
	}
	return out, nil
}

// causesFrom are the causes that begin in a night.
func (sc *Scenario) causesFrom(night int) []Truth {
	var out []Truth
	for _, c := range sc.Causes {
		if max(1, c.Onset) != night {
			continue
		}
		to := c.Until
		if to == 0 {
			to = 1 << 20
		}
		kinds := CauseKinds()
		unit := ""
		if i := slices.IndexFunc(kinds, func(k KindUnit) bool { return k.Kind == c.Kind }); i >= 0 {
			unit = kinds[i].Unit
		}
		out = append(out, Truth{Night: night, Key: string(c.Kind), Kind: KindEpisode, Resource: c.Resource, Cause: string(c.Kind),
			Accept: []string{string(c.Kind)}, From: night, To: to, Size: c.Size, Unit: unit, Expect: ExpectCase})
	}
	return out
}
