package rehearse

// A ScoreCard compares what was reported with what was so.
type ScoreCard struct {
	Lines []ScoreLine // one per key, in order of the alphabet

	Episodes, EpisodesFound int // disturbances of the measuring system
	RightCause              int // of the found ones: cause and resource both right in first place
	Delay                   []Delay
	FalseCases              []FoundCase // cases that fit no episode
	MessagesPerEpisode      float64     // opening messages
	FalseHolds              []string    // sets held although nothing was injected that reaches them
	CleanSets               int         // sets into which nothing was injected
	Covered, Intervals      int         // clean standing results whose pKa +- U holds the true constant
	CoveredAll, AllStanding int         // the same over every standing result
	HarmSets, HarmCaught    int         // results displaced by more than U/3, and of these held, in question or noted
}

// A ScoreLine counts one key.
type ScoreLine struct {
	Key      string
	Expect   string
	Injected int
	Found    int
	Missed   []string // what was missed
}

// A Delay says how long an episode stayed unseen.
type Delay struct {
	Key      string
	Resource string
	From     int
	Opened   int
	Nights   int // Opened - From
}
