package settings

import "time"

// Defaults with the reason for each. "Specified" means that the requirements
// of this program name the value; "common practice, no source" that the trade
// uses it; "our choice" that it is nobody's rule.
const (
	DefaultLaboratory  = "Laboratory"
	DefaultZone        = "UTC"   // a laboratory that states no zone gets no hidden summer time
	DefaultNightBegins = "18:00" // specified: the sequence starts when people leave
	DefaultNightEnds   = "06:00" // specified
	DefaultBriefAt     = "06:30" // specified: half an hour before the analyst reads it

	DefaultDataDir    = "/var/lib/pkvigil" // where a system service keeps its state
	DefaultMaxFileMiB = 64                 // a plate of 384 scans of 1,000 points in long text is about 10 MiB
	DefaultWorkers    = 0                  // one per core
	DefaultJobTimeout = 10 * time.Minute   // a fit takes seconds; a Monte Carlo of ten thousand draws a minute

	DefaultSettle  = 5 * time.Second  // specified
	DefaultSweep   = 15 * time.Second // network shares tell nothing; a sweep of 50,000 names takes a quarter of a second
	DefaultSilence = 2 * time.Hour    // specified: two hours after the usual first file

	DefaultSteps         = 1
	DefaultProfile       = "ladder"
	DefaultUIonicRel     = 0.02 // specified: volumes and weights of a recipe made by hand
	DefaultTemperature   = 25.0 // where pKa are tabulated
	DefaultTarget        = 0.05 // specified: fitness for purpose unless the method says otherwise
	DefaultPathMM        = 10.0 // the usual cell
	DefaultUBaseline     = 0.001
	DefaultSigmaPH       = 0.008 // common practice, no source: good readings repeat to 0.005..0.010
	DefaultUAmount       = 0.005 // our choice: pipetting of one stock into a ladder
	DefaultCeiling       = 1.5   // specified: above it stray light compresses
	DefaultSigmaA        = 0.0   // estimated from the scans themselves
	DefaultRungsMin      = 5     // specified: below five neither the reading noise nor an outlier can be judged
	DefaultQuiet         = 20 * time.Minute
	DefaultDeadline      = 2 * time.Hour // a pH table saved by hand comes within the shift or in the morning
	DefaultActivity      = "davies"
	DefaultReportAt      = 25.0
	DefaultConstant      = "mixed" // what an electrode and absorbances measure; the thermodynamic constant adds the model's doubt
	DefaultCoverage      = 2.0     // GUM: about 95 %
	DefaultMonteCarlo    = 0
	DefaultCalibAge      = 72 * time.Hour // specified: held beyond three days
	DefaultUBuffer       = 0.010          // specified: one bottle of a standard buffer, IUPAC recommendations 2002 (from memory)
	DefaultUCalibration  = 0.3            // specified, mV
	DefaultUDriftPerDay  = 0.003          // specified, pH per day
	DefaultUJunction     = 0.006          // specified, pH
	DefaultUTemperature  = 0.15           // specified, K
	DefaultUActivity     = 0.06           // 0.02 at I = 0.1 mol/L for z = -1, where the Davies correction is 0.32
	DefaultUStray        = 0.0005         // half of 0..0.1 %
	DefaultUImpurity     = 0.0035         // specified: one per cent of a second dye, rectangular
	DefaultFalseAlarm    = 365.0          // one in a year
	DefaultImpactLimit   = 0.02           // specified
	DefaultBaseline      = 20             // specified: settled from twenty nights
	DefaultYoung         = 8              // specified: young from eight nights
	DefaultMailPort      = 587            // RFC 6409, submission
	DefaultMailTLS       = "starttls"
	DefaultListen        = "127.0.0.1:8711"
	DefaultThreeSolution = 3 // rungs of a set of the three-solution profile
)

// Defaults gives settings in which nothing is stated: no folders, rules,
// compounds or people, everything else at its default.
func Defaults() *Settings {
	return &Settings{
		Laboratory: Laboratory{Name: DefaultLaboratory, Zone: DefaultZone, NightBegins: DefaultNightBegins, NightEnds: DefaultNightEnds, BriefAt: DefaultBriefAt},
		Storage:    Storage{DataDir: DefaultDataDir, MaxFileMiB: DefaultMaxFileMiB, Workers: DefaultWorkers, JobTimeout: DefaultJobTimeout},
		Complete:   Complete{Roles: []string{"blank", "ph"}, Rungs: DefaultRungsMin, Silence: DefaultQuiet, Every: true, Deadline: DefaultDeadline},
		Method: Method{Activity: DefaultActivity, ReportAt: DefaultReportAt, Constant: DefaultConstant, CoverageK: DefaultCoverage,
			Ceiling: DefaultCeiling, MonteCarlo: DefaultMonteCarlo, CalibrationAge: DefaultCalibAge},
		Budget: Budget{UBuffer: DefaultUBuffer, UCalibration: DefaultUCalibration, UDriftPerDay: DefaultUDriftPerDay, UJunction: DefaultUJunction,
			UTemperature: DefaultUTemperature, UActivity: DefaultUActivity, UStray: DefaultUStray, UImpurity: DefaultUImpurity},
		Charts: Charts{FalseAlarmNights: DefaultFalseAlarm, ImpactLimit: DefaultImpactLimit, BaselineNights: DefaultBaseline, YoungNights: DefaultYoung},
		Mail:   Mail{Port: DefaultMailPort, TLS: DefaultMailTLS},
		Serve:  Serve{Listen: DefaultListen},
	}
}

// DefaultFolder gives a folder of which only what is stated need be set.
func DefaultFolder() Folder {
	return Folder{Settle: DefaultSettle, Sweep: DefaultSweep, Silence: DefaultSilence}
}

// DefaultCompound gives a compound of which only what is stated need be set.
func DefaultCompound() Compound {
	return Compound{Steps: DefaultSteps, Profile: DefaultProfile, UIonicRel: DefaultUIonicRel, Temperature: DefaultTemperature,
		Target: DefaultTarget, PathMM: DefaultPathMM}
}

// DefaultInstrument gives an instrument of which only what is stated need be set.
func DefaultInstrument() Instrument {
	return Instrument{Ceiling: DefaultCeiling, SigmaA: DefaultSigmaA, SigmaPH: DefaultSigmaPH, UAmount: DefaultUAmount, UBaseline: DefaultUBaseline}
}

// DefaultPerson gives a person who is told of cases, absences and the brief.
func DefaultPerson() Person { return Person{Tells: []string{"cases", "absence", "brief"}} }
