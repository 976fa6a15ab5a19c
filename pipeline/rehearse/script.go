package rehearse

import "time"

// outages are the share that goes away and the database that does not answer.
func (m *nightMaker) outages() {
	s := m.story
	switch m.night {
	case nightUnmounted:
		away, back := s.at(m.night, 1, 12), s.at(m.night, 4, 40)
		for i := range m.deposits {
			d := &m.deposits[i]
			if d.Folder == instTwo && !d.At.Before(away) && d.At.Before(back) {
				// Written on the instrument's disk all the while; we see it when the share is back.
				d.At = back.Add(time.Second + d.At.Sub(away)/time.Duration(1000))
			}
		}
		m.add(Deposit{At: away, Act: Unmount, Folder: instTwo, Note: "share not mounted"})
		m.add(Deposit{At: back, Act: Mount, Folder: instTwo, Note: "share back"})
	case nightDatabase:
		m.add(Deposit{At: s.at(m.night, 1, 0), Act: DatabaseAway, Note: "database does not answer"})
		m.add(Deposit{At: s.at(m.night, 2, 30), Act: DatabaseBack, Note: "database answers"})
	}
}

// script are the decisions of people, all on the morning after the night.
func (m *nightMaker) script() {
	s := m.story
	at := func(hour, minute int) time.Time { return s.at(m.night, hour, minute) }
	m.sign(at(8, 15), Signature{Verb: "release", Object: "night:" + s.Date(m.night), As: analyst, Because: "morning review"})
	switch m.night {
	case 14:
		for _, inst := range []string{instOne, instTwo} {
			m.sign(at(8, 40), Signature{Verb: "baseline", Object: inst + "/*", As: metrologist, Because: "fourteen nights without a disturbance"})
		}
	case 19:
		m.sign(at(8, 50), Signature{Verb: "acknowledge", Object: "E-31", As: manager, Because: "electrode to be refilled and calibrated on Monday, new one ordered"})
	case 20:
		m.sign(at(8, 40), Signature{Verb: "baseline", Object: instTwo + "/*", As: metrologist, Because: "twenty nights, U2 undisturbed"})
	case 22, nightReplaced:
		m.sign(at(9, 0), Signature{Verb: "reopen", Object: instOne, As: manager, Because: "references good before and after the samples, with the electrode calibrated"})
	case nightTidied:
		m.tidied()
	case nightLamp:
		m.sign(at(8, 45), Signature{Verb: "acknowledge", Object: instOne, As: metrologist, Because: "scale to be adjusted, pKa not concerned"})
	case nightBadBuffer:
		m.sign(at(9, 5), Signature{Verb: "acknowledge", Object: "CB-207", As: manager, Because: "comparison with a fresh bottle ordered"})
	case nightGoodBuffer:
		m.sign(at(8, 50), Signature{Verb: "accept", Object: "CB-207", As: metrologist, Because: "true value 9.952 found by comparison with CB-208; recompute the sets of nights 41 to 45"})
		m.sign(at(8, 55), Signature{Verb: "confirm", Object: "CB-207", As: manager, Because: "sets in the acid range have no weight on this bottle"})
		for i, inst := range []string{instOne, instTwo} {
			m.sign(at(9, 5*i), Signature{Verb: "reopen", Object: inst, As: manager, Because: "bottle CB-207 corrected and replaced, references good on both sides"})
		}
	case 47:
		m.sign(at(8, 45), Signature{Verb: "baseline", Object: instOne + "/*", As: metrologist, Because: "new electrode and lamp: nights 37 to 40 and 46 to 47"})
	case nightOldLotEnds:
		m.sign(at(8, 45), Signature{Verb: "baseline", Object: "RI-C2", As: metrologist, Because: "five nights beside the old lot"})
	case nightExchange:
		for _, b := range s.Bookings(m.night) {
			if b.Instrument == instOne && !b.Reference {
				m.sign(at(9, 0), Signature{Verb: "accept", Object: b.Key(), As: analyst, Because: "vials 5 and 6 found exchanged on the tray"})
				break
			}
		}
	}
}

// tellSet writes down what is true of one set.
func (m *nightMaker) tellSet(b Booking, set *Set, t trouble) {
	harm, resource := m.story.harm(b)
	spoiled := t.key == "scan.bubble" || t.key == "name.swap2" || t.key == "name.shift1" || t.key == "name.blankwrong"
	clean := !spoiled && b.Lot != impureLot && harm < 0.003 && harm > -0.003
	m.tell(Truth{Key: "set.pka", Kind: KindPKa, Set: b.Key(), Compound: b.Compound, PKa: m.story.constantsOf(b), Clean: clean, Size: harm, Unit: "pH"})
	if harm > 0.003 || harm < -0.003 {
		m.tell(Truth{Key: "set.harm", Kind: KindHarm, Set: b.Key(), Resource: resource, Size: harm, Unit: "pH"})
	}
	m.tellTrouble(b, set, t)
	if b.Lot == impureLot {
		m.tell(Truth{Key: "chem.impB", Kind: KindSet, Set: b.Key(), Resource: b.Lot, Size: 4, Unit: "%", Expect: ExpectHeld, Note: "second dye, pKa 0.8 higher, bands 10 nm to the blue"})
	}
	if b.Compound == "RI-C2" && b.Night == nightNewLot && b.Slot == "open" {
		m.tell(Truth{Key: "ref.lotchange", Kind: KindSet, Set: b.Key(), Resource: b.Lot, Resources: []string{"RI-C2", "RI-C", "RC-11"},
			Accept: []string{"reference.lot", "stock", "impurity.constant"}, From: nightNewLot, To: nightNewLot + 10, Size: -0.7, Unit: "%", Expect: ExpectAsk, Note: "new lot of a reference: amount and ratio differ, pKa does not"})
	}
}

// tellTrouble writes down what struck a set.
func (m *nightMaker) tellTrouble(b Booking, set *Set, t trouble) {
	if t.key == "" {
		return
	}
	truth := Truth{Key: t.key, Kind: KindSet, Set: b.Key(), Size: t.size}
	file := ""
	if i := struckFile(m.story.exportsOf(set), t); i >= 0 {
		file = b.Instrument + "/" + m.story.exportsOf(set)[i].Path
	}
	switch t.key {
	case "scan.bubble", "name.blankwrong":
		truth.Expect, truth.Unit = ExpectNoted, "absorbance"
	case "name.swap2", "name.shift1":
		truth.Expect, truth.Size = ExpectHeld, 0
	case "name.missing":
		truth.Expect, truth.Size = ExpectWaiting, 0
	case "name.phlate":
		truth.Expect, truth.Unit, truth.File = ExpectLate, "h", file
	case "file.copy":
		truth.Kind, truth.Expect, truth.File, truth.Size = KindFile, ExpectTwin, copyName(file), 0
	case "file.reexport":
		truth.Expect, truth.File = ExpectRevised, file
	case "name.typo":
		truth.Kind, truth.Expect, truth.Size = KindFile, ExpectParked, 0
		truth.File = b.Instrument + "/" + typo(file[len(b.Instrument)+1:], t.coin)
	case "file.comma":
		truth.Kind, truth.Expect, truth.File, truth.Size = KindFile, ExpectNothing, file, 0
		if t.coin && b.Instrument == instOne {
			truth.Expect = ExpectRefused
		}
	case "file.cut":
		truth.Kind, truth.Expect, truth.File, truth.Unit = KindFile, ExpectRefused, file, "of its bytes left"
	}
	if t.key == "scan.bubble" || t.key == "name.swap2" || t.key == "name.missing" {
		truth.Note = "rung " + rungKey(t.rung+1)
	}
	m.tell(truth)
}

// tidied: somebody deletes an old set from the export folder to make room. Its
// files were taken long before; nothing may be lost and nothing inferred.
func (m *nightMaker) tidied() {
	s := m.story
	for _, b := range s.Bookings(2) {
		if b.Reference || b.Instrument != instOne || s.troubleOf(b, false).key != "" {
			continue
		}
		for i, f := range s.exportsOf(s.Set(b)) {
			m.add(Deposit{At: s.at(m.night, 10, 0).Add(time.Duration(i) * time.Second), Act: Remove, Folder: b.Instrument, Path: f.Path, Note: "deleted by hand"})
		}
		m.tell(Truth{Key: "file.vanished", Kind: KindAbsence, Resource: b.Instrument, Set: b.Key(), Expect: ExpectNothing, Note: "files of a computed set deleted by hand"})
		return
	}
}
