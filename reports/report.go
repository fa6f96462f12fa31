// Package reports holds the Report: what kneepoint found out about one lot, as
// plain data. It computes nothing and knows no other room of the house;
// reports/build fills it, reports/page draws it, and other programs read it as
// JSON under the contract of schema.json.
//
// Three rules hold everywhere. Intervals are 95 % unless a method says
// otherwise. Values are in the unit that stands beside them. What could not be
// computed is null (NaN in Go) and a Why beside it says why; lists are never
// null.
package reports

//go:generate go run ./internal/schemagen report.go schema.json

// SchemaVersion is the version of the JSON contract.
const SchemaVersion = 1

// Report is the whole account of one lot.
type Report struct {
	Schema       int           `json:"schema"`
	Tool         Tool          `json:"tool"`
	Inputs       []Input       `json:"inputs"`
	ProductFile  *Input        `json:"product_file"` // null when triaged without one
	Baseline     Source        `json:"baseline"`
	Lot          string        `json:"lot"`
	Product      string        `json:"product"`
	Dice         int           `json:"dice"` // tested dice, each counted once
	Program      Program       `json:"program"`
	Geometry     Geometry      `json:"geometry"`
	Wafers       []Wafer       `json:"wafers"`
	Quality      []Quality     `json:"quality"`
	Yield        LotYield      `json:"yield"`
	Bins         []Bin         `json:"bins"`
	Tests        []Test        `json:"tests"`
	Zones        []Zone        `json:"zones"` // rings and sectors over all wafers
	Screens      []Screen      `json:"screens"`
	Variance     []Variance    `json:"variance"`
	Groups       []Group       `json:"groups"`
	GroupsWhy    string        `json:"groups_why,omitempty"` // why the wafers are in no groups
	Signatures   []Signature   `json:"signatures"`           // of all wafers laid on each other
	Stacks       []Stack       `json:"stacks"`               // wafers laid on each other by group, and by test that loses most
	StacksWhy    string        `json:"stacks_why,omitempty"` // why nothing is laid on each other
	Repeaters    []Repeater    `json:"repeaters"`            // die positions that fail on more wafers than chance allows, at most 100
	RepeatersAll int           `json:"repeaters_total"`
	Associations []Association `json:"associations"`
	Causes       []Cause       `json:"causes"`
	CausesBy     string        `json:"causes_by"` // how the probabilities were weighed, and whether that was calibrated for this product
	Epi          *Epi          `json:"epi"`       // null with EpiWhy when not computed
	EpiWhy       string        `json:"epi_why,omitempty"`
	Disposition  Disposition   `json:"disposition"`
	Cautions     []string      `json:"cautions"`

	// Pictures are for the page only; the JSON carries their numbers elsewhere.
	Pictures Pictures `json:"-"`
}

// Tool names the program that wrote the report.
type Tool struct {
	Name    string `json:"name"`
	Version string `json:"version"`
}

// Input is one file that was read.
type Input struct {
	File   string `json:"file"`
	SHA256 string `json:"sha256"`
	Format string `json:"format"` // "delimited text, wide", ...
	Bytes  int64  `json:"bytes"`
	Rows   int64  `json:"rows"` // data rows read
}

// Source says where a baseline came from.
type Source struct {
	Source string `json:"source"` // "product file", "ledger", "lot majority", "none"
	ID     string `json:"id"`
	SHA256 string `json:"sha256"`
}

// Program is what was found out about the test program.
type Program struct {
	StopOnFail bool   `json:"stop_on_fail"`
	Text       string `json:"text"`        // how it was told
	PassRule   string `json:"pass_rule"`   // how a die is judged passing
	RetestRule string `json:"retest_rule"` // which measurement of a retested die counts
}

// Geometry is the wafer grid; numbers are NaN where it is not known.
type Geometry struct {
	DiameterMM      Number `json:"diameter_mm"`
	DieWidthMM      Number `json:"die_width_mm"`
	DieHeightMM     Number `json:"die_height_mm"`
	EdgeExclusionMM Number `json:"edge_exclusion_mm"`
	CentreX         Number `json:"centre_x"` // in die coordinates
	CentreY         Number `json:"centre_y"`
	Source          string `json:"source"` // "product file", "found from the die outline", ...
	Why             string `json:"why,omitempty"`
}

// Interval is an estimate with its 95 % interval.
type Interval struct {
	Estimate Number `json:"estimate"`
	Lower    Number `json:"lower"`
	Upper    Number `json:"upper"`
	Method   string `json:"method,omitempty"`
	Why      string `json:"why,omitempty"`
}

// Wafer is one wafer's account.
type Wafer struct {
	ID         string            `json:"id"`
	Dice       int               `json:"dice"`
	Passing    int               `json:"passing"`
	Retested   int               `json:"retested"`
	Yield      Interval          `json:"yield"`
	FirstPass  Number            `json:"first_pass"`
	Rank       int               `json:"rank"`                    // 1 = lowest yield
	Stands     string            `json:"stands" enum:"low,high,"` // "low", "high" or "" against the rest of the lot
	MainLoss   []Share           `json:"main_loss"`               // tests that lose most on this wafer, first loss, at most three
	Spatial    Spatial           `json:"spatial"`                 // is the fail map more than chance
	Signatures []Signature       `json:"signatures"`              // patterns of the fail map; empty with spatial.why
	EpiWhy     string            `json:"epi_why,omitempty"`
	Epi        *Epi              `json:"epi"`        //
	Group      int               `json:"group"`      // 0 when not grouped
	Attributes map[string]string `json:"attributes"` // wafer history
}

// Share is a named part of something.
type Share struct {
	Name  string `json:"name"`
	Share Number `json:"share"`
	Dice  int    `json:"dice"`
}

// Spatial holds the map statistics of one wafer's fails.
type Spatial struct {
	JoinCount *JoinCount `json:"join_count"`
	Alike     *Alike     `json:"autocorrelation"` // of pass and fail
	HotSpots  *HotSpots  `json:"hot_spots"`
	Scan      *Scan      `json:"scan"`
	Clusters  []Cluster  `json:"clusters"` // largest first, at most ten; Total says how many there are
	Total     int        `json:"clusters_total"`
	Why       string     `json:"why,omitempty"`
}

// Alike says how alike neighbouring dice are: up to eight neighbours, moments with
// the values permuted over the dice.
type Alike struct {
	N     int    `json:"n"`
	Moran Moment `json:"moran"` // Moran's I: 0 by chance, towards 1 where neighbours are alike
	Geary Moment `json:"geary"` // Geary's C: 1 by chance, towards 0 where neighbours are alike
	Why   string `json:"why,omitempty"`
}

// Moment is a map statistic against chance. Z is positive where neighbours are
// alike; the p-value is two-sided.
type Moment struct {
	Value    Number `json:"value"`
	Expected Number `json:"expected"`
	Z        Number `json:"z"`
	PValue   Number `json:"p_value"`
}

// HotSpots are dice among more failing dice, themselves included, than chance
// allows: Getis and Ord's local statistic at a false discovery rate.
type HotSpots struct {
	Level   Number    `json:"level"`   // false discovery rate
	Dice    int       `json:"dice"`    // with such surroundings, failing or not
	Fails   int       `json:"fails"`   // of these, failing
	Regions []Cluster `json:"regions"` // that hang together, largest first, at most five
	Why     string    `json:"why,omitempty"`
}

// Scan is the spatial scan statistic: the circle in which fails are most unlike
// chance, with the chance that a wafer with as many fails placed at random has any
// circle as unlikely.
type Scan struct {
	X           Number `json:"x"` // centre, die coordinates
	Y           Number `json:"y"`
	Radius      Number `json:"radius"`
	Unit        string `json:"unit"` // of the radius
	Dice        int    `json:"dice"`
	Fails       int    `json:"fails"`
	Expected    Number `json:"expected"` // fails, at the wafer's rate
	PValue      Number `json:"p_value"`
	Simulations int    `json:"simulations"`
	Windows     int    `json:"windows"`
	Method      string `json:"method"`
	Why         string `json:"why,omitempty"` // why there is no circle
}

// JoinCount is the fail-fail join-count test under randomisation.
type JoinCount struct {
	Neighbours string `json:"neighbours"` // "rook" or "queen"
	FailFail   Number `json:"fail_fail"`
	Expected   Number `json:"expected"`
	Variance   Number `json:"variance"`
	Z          Number `json:"z"`
	PValue     Number `json:"p_value"` // one-sided, clustering
	Method     string `json:"method"`
}

// Cluster is one connected group of failing dice.
type Cluster struct {
	Dice     int    `json:"dice"`
	X        Number `json:"x"` // centre, die coordinates
	Y        Number `json:"y"`
	RadiusMM Number `json:"radius_mm"` // distance of the centre from the wafer's centre
	Width    int    `json:"width"`     // extent in dice
	Height   int    `json:"height"`
	Why      string `json:"why,omitempty"`
}

// Signature is a spatial pattern of fails: random where fails have no structure,
// none where they are too few to judge. Those of a stack are found in the positions
// that fail on more wafers than usual.
type Signature struct {
	Kind       string   `json:"kind" enum:"edge-ring,edge-arc,centre,annulus,line,blob,gradient,sector,shot-repeat,site,stripe,near-total,random,none"`
	Strength   Number   `json:"strength"`   // share of the fails that are due to it
	PValue     Number   `json:"p_value"`    // chance that fails without it show any place that stands out as much
	Loss       Number   `json:"loss"`       // share of the tested dice: fails beyond the background, patterns that overlap sharing
	Rate       Number   `json:"rate"`       // fail rate inside the outline
	Background Number   `json:"background"` // fail rate there without it, or outside of all outlines
	Cover      Number   `json:"cover"`      // share of the tested dice inside the outline
	Wafers     []string `json:"wafers"`     // of a stack: wafers that fail more inside than outside, beyond chance
	PeriodX    int      `json:"period_x,omitempty"`
	PeriodY    int      `json:"period_y,omitempty"`
	Outline    []Path   `json:"outline"` // lines to draw on the map; empty where the kind has none
	Text       string   `json:"text,omitempty"`
}

// Path is a line on the wafer through points in die coordinates, whole numbers being
// the dice's middles; a closed one ends where it begins.
type Path struct {
	X []Number `json:"x"`
	Y []Number `json:"y"`
}

// Stack is wafers laid on each other: how often each die position fails.
type Stack struct {
	Of         string      `json:"of" enum:"group,test"`
	Group      int         `json:"group"` // 0 for a test
	Test       string      `json:"test"`  // "" for a group: all fails
	Wafers     int         `json:"wafers"`
	Positions  int         `json:"positions"`
	Rate       Number      `json:"rate"` // fail rate
	Signatures []Signature `json:"signatures"`
	Why        string      `json:"why,omitempty"`
}

// Repeater is a die position that fails on more wafers than chance allows, given how
// often dice fail on each wafer at that distance from its centre.
type Repeater struct {
	X        int    `json:"x"`
	Y        int    `json:"y"`
	Tested   int    `json:"tested"`  // wafers
	Failing  int    `json:"failing"` // wafers
	Expected Number `json:"expected"`
	PValue   Number `json:"p_value"`
	Adjusted Number `json:"adjusted_p_value"` // for all positions (Benjamini and Hochberg)
	RadiusMM Number `json:"radius_mm"`
	Main     string `json:"main"` // test that fails there most often first
}

// Quality is one thing about the data that a reader must know.
type Quality struct {
	Code     string `json:"code"`
	Severity string `json:"severity" enum:"info,warning,severe"` // "info", "warning", "severe"
	Text     string `json:"text"`
	Dice     int    `json:"dice"`
	Remedy   string `json:"remedy,omitempty"`
}

// LotYield is the lot's yield.
type LotYield struct {
	Interval
	Passing        int        `json:"passing"`
	Counting       Interval   `json:"counting"` // Wilson, dice as independent
	FirstPass      Number     `json:"first_pass"`
	SystematicLoss Number     `json:"systematic_loss"`
	RandomLoss     Number     `json:"random_loss"`
	LossWhy        string     `json:"loss_why,omitempty"`
	LossSplit      *LossSplit `json:"loss_split"` // how the two were found; null with loss_why
	Baseline       Number     `json:"baseline"`
	Grades         []Grade    `json:"grades"`
}

// LossSplit splits the loss by windows of neighbouring dice: random loss falls on
// dice one by one, systematic loss on regions.
type LossSplit struct {
	Systematic Interval `json:"systematic"`
	Random     Interval `json:"random"`
	RandomRate Interval `json:"random_rate"` // of a die outside of what is lost together
	Windows    []Window `json:"windows"`
}

// Window is the yield of windows of one size: all dice in it good.
type Window struct {
	Wide   int    `json:"wide"` // dice
	High   int    `json:"high"`
	Count  int    `json:"count"`
	Yield  Number `json:"yield"`
	Fitted Number `json:"fitted"` // null where the size was not used
}

// Grade is one passing bin.
type Grade struct {
	Bin   int    `json:"bin"`
	Name  string `json:"name"`
	Dice  int    `json:"dice"`
	Share Number `json:"share"` // of all tested dice
}

// Bin is one bin's count.
type Bin struct {
	Kind       string `json:"kind"` // "hard" or "soft"
	Bin        int    `json:"bin"`
	Name       string `json:"name"`
	Pass       bool   `json:"pass"`
	Dice       int    `json:"dice"`
	Share      Number `json:"share"`
	Cumulative Number `json:"cumulative"` // over failing bins by falling count; NaN for passing ones
}

// Test is one parametric test's account. Every value is in Unit.
type Test struct {
	Name          string       `json:"name"`
	Measures      string       `json:"measures"`
	Unit          string       `json:"unit"`
	Condition     string       `json:"condition"`
	Lower         Number       `json:"lower_limit"`
	Upper         Number       `json:"upper_limit"`
	LimitFrom     string       `json:"limits_from"` // "product file", "data file", ""
	N             int          `json:"n"`           // dice with a value
	Missing       int          `json:"missing"`
	Censored      Censored     `json:"censored"`
	Over          string       `json:"over"` // which dice the distribution is over
	Mean          Number       `json:"mean"`
	SD            Number       `json:"sd"`
	Median        Number       `json:"median"`
	MADSigma      Number       `json:"mad_sigma"`
	Min           Number       `json:"min"`
	Max           Number       `json:"max"`
	Quantiles     []Quantile   `json:"quantiles"` // Hyndman-Fan 8
	Skewness      Number       `json:"skewness"`
	Kurtosis      Number       `json:"kurtosis"` // excess
	Why           string       `json:"why,omitempty"`
	Histogram     *Histogram   `json:"histogram"`
	Fit           *Fit         `json:"fit"`
	Capability    *Capability  `json:"capability"`
	Loss          Loss         `json:"loss"`
	LowFails      int          `json:"low_fails"`      // dice below the lower limit
	HighFails     int          `json:"high_fails"`     // dice above the upper limit
	Marginal      Number       `json:"marginal"`       // share of this test's failing dice that fail by little
	MarginalMeans string       `json:"marginal_means"` // what the share is of, or why there is none
	LimitCurve    []LimitPoint `json:"yield_against_limit"`
	LimitWhy      string       `json:"yield_against_limit_why,omitempty"` // why points, or all of it, are not known
	ByWafer       []WaferLevel `json:"by_wafer"`
	Surface       *Surface     `json:"surface"` // of the median over the wafers at each die position
	SurfaceWhy    string       `json:"surface_why,omitempty"`
	Repeatability *Repeat      `json:"repeatability"` // from retested dice
}

// Censored counts readings known only as bounds.
type Censored struct {
	AtLeast int    `json:"at_least"`
	AtMost  int    `json:"at_most"`
	Clamp   Number `json:"clamp"`
	Floor   Number `json:"floor"`
}

// Quantile is one point of a distribution.
type Quantile struct {
	P     Number `json:"p"`
	Value Number `json:"value"`
}

// Histogram is counts over bins of equal width: Counts[i] over [Edges[i],
// Edges[i+1]), the last bin closed. Scale is "linear" or "log" (edges then are
// equal steps of the logarithm). Below and Above count values outside.
type Histogram struct {
	Scale  string   `json:"scale"`
	Rule   string   `json:"rule"`
	Edges  []Number `json:"edges"`
	Pass   []int    `json:"pass"`
	Fail   []int    `json:"fail"`
	Fitted []Number `json:"fitted"` // readings that the fit expects in each; empty without one
	Below  int      `json:"below"`
	Above  int      `json:"above"`
}

// Fit is the distribution chosen to describe a test's readings.
type Fit struct {
	Distribution string       `json:"distribution"` // normal, lognormal, Weibull, gamma; "" when none could be fitted
	Empirical    bool         `json:"empirical"`    // no family describes the readings: take percentiles from them
	Reason       string       `json:"reason"`
	Parameters   []Parameter  `json:"parameters"`
	Candidates   []Candidate  `json:"candidates"`
	Misfit       string       `json:"misfit"`    // how far the readings are from it, in a sentence
	Gap          Number       `json:"gap"`       // largest distance of the distribution functions
	AsideLow     int          `json:"aside_low"` // gross outliers set aside before fitting
	AsideHigh    int          `json:"aside_high"`
	Populations  []Population `json:"populations"` // of a mixture, when no family does
}

// Parameter is a parameter of a fit.
type Parameter struct {
	Name string `json:"name"`
	Interval
}

// Candidate is a family that was tried.
type Candidate struct {
	Distribution string `json:"distribution"`
	AIC          Number `json:"aic"`
	Why          string `json:"why,omitempty"`
}

// Population is one of several populations in a test's readings.
type Population struct {
	Share Number `json:"share"`
	Mean  Number `json:"mean"`
	SD    Number `json:"sd"`
	From  Number `json:"from"` // the stretch of readings that is this population's; null: open
	To    Number `json:"to"`
}

// Capability is the process capability of a test.
type Capability struct {
	N             int                   `json:"n"`
	Cp            Interval              `json:"cp"`
	Cpk           Interval              `json:"cpk"`
	Pp            Interval              `json:"pp"`
	Ppk           Interval              `json:"ppk"`
	Within        Number                `json:"within_sigma"`
	Overall       Number                `json:"overall_sigma"`
	Over          string                `json:"over"` // which dice
	Why           string                `json:"why,omitempty"`
	Notes         []string              `json:"notes"`
	ByPercentiles *PercentileCapability `json:"by_percentiles"`
}

// PercentileCapability is capability by the 0.135, 50 and 99.865 % percentiles of
// the chosen distribution, or of the readings where no family describes them.
type PercentileCapability struct {
	Source     string   `json:"source"`
	N          int      `json:"n"`
	AsideLow   int      `json:"aside_low"` // gross outliers that were set aside, as in the fit
	AsideHigh  int      `json:"aside_high"`
	Low        Interval `json:"low"`
	Median     Interval `json:"median"`
	High       Interval `json:"high"`
	Pp         Interval `json:"pp"`
	Ppk        Interval `json:"ppk"`
	PPMBelow   Interval `json:"ppm_below"` // expected parts per million beyond the limits, of what was not set aside
	PPMAbove   Interval `json:"ppm_above"`
	PPMOutside Interval `json:"ppm_outside"`
	Why        string   `json:"why,omitempty"`
	Notes      []string `json:"notes"`
}

// Repeat is the gauge repeatability seen on retested dice.
type Repeat struct {
	Dice  int    `json:"dice"`  // dice with both readings
	Sigma Number `json:"sigma"` // of one reading, in the test's unit
	Shift Number `json:"shift"` // median of last less first
	Why   string `json:"why,omitempty"`
}

// Loss is the share of tested dice that a test fails. Alone and Any are null
// on a stop-on-fail program.
type Loss struct {
	First     Number `json:"first"`
	Alone     Number `json:"alone"`
	Any       Number `json:"any"`
	FirstDice int    `json:"first_dice"`
	AloneDice *int   `json:"alone_dice"`
	AnyDice   *int   `json:"any_dice"`
	Why       string `json:"why,omitempty"`
}

// LimitPoint is the lot's yield with one limit of one test moved.
type LimitPoint struct {
	Limit string `json:"limit"` // "lower" or "upper"
	Shift Number `json:"shift"` // -0.10 ... 0.10 of the limit
	Value Number `json:"value"` // the moved limit
	Yield Number `json:"yield"`
}

// WaferLevel is a test's level on one wafer.
type WaferLevel struct {
	Wafer    string `json:"wafer"`
	N        int    `json:"n"`
	Median   Number `json:"median"`
	MADSigma Number `json:"mad_sigma"`
	Q05      Number `json:"q05"`
	Q25      Number `json:"q25"`
	Q75      Number `json:"q75"`
	Q95      Number `json:"q95"`
	Fails    int    `json:"fails"` // dice outside a limit of this test
	Why      string `json:"why,omitempty"`

	Surface *Surface `json:"surface"` // null but for the few tests that lose most or have most shape
}

// Surface is the smooth shape of a test's readings over the wafer: Zernike terms,
// as many as cross-validation asks for, robust to outliers. Shares are of the
// variance of its readings without outliers. Bowl is the edge less the centre, tilt the
// rise from edge to edge, roll-off what the last fifth of the radius has beyond both.
type Surface struct {
	N         int      `json:"n"` // readings or positions fitted
	Outliers  int      `json:"outliers"`
	Over      string   `json:"over"` // what was fitted
	Unit      string   `json:"unit"` // of noise, bowl, tilt, roll-off; "ln" when the fit is of the logarithm
	Terms     int      `json:"terms"`
	Order     int      `json:"order"` // radial
	Smooth    Number   `json:"smooth_share"`
	Site      Number   `json:"site_share"` // null where test sites are not known
	Die       Number   `json:"die_share"`
	Noise     Number   `json:"noise"` // robust sigma about the surface
	Bowl      Interval `json:"bowl"`
	Tilt      Interval `json:"tilt"`
	Direction Number   `json:"tilt_direction"` // of steepest rise, degrees counter-clockwise from +x
	RollOff   Interval `json:"roll_off"`
	Alike     *Alike   `json:"autocorrelation"` // of the readings
	Why       string   `json:"why,omitempty"`
}

// Zone is the yield of a ring or a sector over all wafers.
type Zone struct {
	Kind  string   `json:"kind"` // "ring" or "sector"
	Index int      `json:"index"`
	Name  string   `json:"name"`
	From  Number   `json:"from"` // mm, or degrees counter-clockwise from +x
	To    Number   `json:"to"`
	Dice  int      `json:"dice"`
	Yield Interval `json:"yield"`
}

// Screen is one screen for dice that pass every limit and still do not belong, and
// what it would cost. Screening is a proposal.
type Screen struct {
	Name       string `json:"name"`
	Test       string `json:"test"`  // "" for a screen over several
	Dice       int    `json:"dice"`  // passing dice that it would take
	Extra      int    `json:"extra"` // of them, those that no screen above in the list takes
	Loss       Number `json:"loss"`  // of yield, as a share of all tested dice
	LossLower  Number `json:"loss_lower"`
	LossUpper  Number `json:"loss_upper"`
	LowerLimit Number `json:"lower_limit"` // part average limits, in the test's unit
	UpperLimit Number `json:"upper_limit"`
	Unit       string `json:"unit"`
	Text       string `json:"text"`
	Why        string `json:"why,omitempty"` // why there is no number
}

// Variance is one level's part of a test's spread over passing dice.
type Variance struct {
	Test       string   `json:"test"`
	Level      string   `json:"level"` // "wafer", "zone", "zone, pattern" (the same on every wafer), "die"
	Groups     int      `json:"groups"`
	Unit       string   `json:"unit"` // of sigma; "ln" when the split is of the logarithm
	Sigma      Interval `json:"sigma"`
	Share      Number   `json:"share"`
	ShareLower Number   `json:"share_lower"`
	ShareUpper Number   `json:"share_upper"`
	Text       string   `json:"text,omitempty"` // on a test's first row: where its spread comes from
}

// Group is a set of wafers whose maps are alike.
type Group struct {
	ID     int      `json:"id"`
	Wafers []string `json:"wafers"`
	Dice   int      `json:"dice"`
	Yield  Number   `json:"yield"`
	Text   string   `json:"text"`
}

// Association is a test or the yield against another column that it goes with by
// more than chance.
type Association struct {
	Of       string   `json:"of"`
	With     string   `json:"with"`
	Cases    string   `json:"cases"` // what was taken as independent: wafers, or dice of a single wafer
	N        int      `json:"n"`
	Effect   Interval `json:"effect"` // in the test's unit; of the yield a share
	Unit     string   `json:"unit"`
	Strength Number   `json:"strength"` // share of the variance in rank, less chance
	PValue   Number   `json:"p_value"`
	Adjusted Number   `json:"adjusted_p_value"` // for all looks (Benjamini and Hochberg)
	Looks    int      `json:"looks"`
	Text     string   `json:"text"`
}

// Cause is one physical cause with its probability. Loss is what the lot would yield
// more without it, as a share of all tested dice.
type Cause struct {
	Cause       string     `json:"cause"`
	Text        string     `json:"text"` // what happened, in words
	Direction   string     `json:"direction"`
	Probability Number     `json:"probability"`
	Prior       Number     `json:"prior_probability"` // before any evidence; odds are the catalogue's or the product file's
	Why         string     `json:"why,omitempty"`
	Loss        Interval   `json:"loss"`
	Dice        int        `json:"dice"` // that failed by it
	Wafers      []string   `json:"wafers"`
	For         []Evidence `json:"for"`
	Against     []Evidence `json:"against"`
	Alike       []string   `json:"alike"` // causes that this lot does not tell from it
	Next        []Next     `json:"next"`
}

// Evidence is one observation that speaks for or against a cause. LogOdds are natural
// logs of odds against nothing being wrong; of within-baseline and unexplained,
// against the likeliest other cause.
type Evidence struct {
	Text    string   `json:"text"`
	LogOdds Number   `json:"log_odds"`
	Test    string   `json:"test"`
	Wafers  []string `json:"wafers"`
}

// Next is a measurement worth making. Caution says what can hurt in making it.
type Next struct {
	Text            string `json:"text"`
	InformationBits Number `json:"information_bits"`
	Caution         string `json:"caution,omitempty"`
}

// Epi is what the electrical data say of the epi layer: of a wafer, or of a lot's
// typical wafer. Estimates are with the prior that the product's spec stands for;
// DataOnly is without, for charts and drift. Errors of the device model and of the
// baseline are common to all wafers: a lot's interval is hardly narrower than a
// wafer's.
type Epi struct {
	NetThicknessUM      Interval       `json:"net_thickness_um"` // what tests see: thickness less base and up-diffused tail
	ThicknessUM         SpecInterval   `json:"thickness_um"`     // as grown
	DopingCM3           Interval       `json:"doping_cm3"`
	ResistivityOhmCM    SpecInterval   `json:"resistivity_ohm_cm"` // at 23 C, ASTM F723
	Regime              string         `json:"regime" enum:"reach-through,no reach-through,borderline"`
	DepletionRatio      Interval       `json:"depletion_ratio"`      // net thickness over the depletion width at BVceo in endless epi
	ThicknessObservable bool           `json:"thickness_observable"` // data alone bound the net thickness from both sides
	DopingObservable    bool           `json:"doping_observable"`
	ThicknessShare      Number         `json:"net_thickness_share_of_prior"` // width of the interval over that of the prior alone; from 0.9 up not observable
	DopingShare         Number         `json:"doping_share_of_prior"`
	Separable           bool           `json:"separable"` // thickness from doping
	DataOnly            EpiData        `json:"data_only"`
	Parameters          []EpiParameter `json:"parameters"`     // of a lot
	Readings            []EpiReading   `json:"readings"`       // what went in
	Zones               []EpiZone      `json:"zones"`          // of a wafer: centre, middle, edge
	BetweenWafers       *EpiSpread     `json:"between_wafers"` // of a lot; null on a wafer
	Next                []Next         `json:"next"`           // of a lot: measurements that would tell more, most first
	Note                string         `json:"note"`
}

// SpecInterval is an interval against spec limits. InSpec is null where the data
// leave both open, or do not see the quantity: the prior alone proves nothing.
type SpecInterval struct {
	Interval
	SpecLower Number `json:"spec_lower"`
	SpecUpper Number `json:"spec_upper"`
	InSpec    *bool  `json:"in_spec"`
}

// EpiData is what the data alone say, without a belief about thickness and doping.
type EpiData struct {
	NetThicknessUM   SightInterval `json:"net_thickness_um"`
	ThicknessUM      SightInterval `json:"thickness_um"`
	DopingCM3        SightInterval `json:"doping_cm3"`
	ResistivityOhmCM SightInterval `json:"resistivity_ohm_cm"`
}

// SightInterval is an interval that may be open: there is an estimate only where
// both sides are bounded.
type SightInterval struct {
	Interval
	Sight string `json:"sight" enum:"observable,lower bound only,upper bound only,not observable"`
}

// EpiParameter is another process parameter that the same inversion gives, as a
// ratio to the baseline.
type EpiParameter struct {
	Name string `json:"name"`
	Interval
	Prior    Interval `json:"prior"`     // believed beforehand
	DataOnly Interval `json:"data_only"` // null where the data do not see it
	Seen     bool     `json:"seen"`
}

// EpiReading is a test's level that went into the inversion.
type EpiReading struct {
	Test   string `json:"test"`
	Ratio  Number `json:"ratio"` // over the baseline's level
	Sigma  Number `json:"sigma"` // of its logarithm
	Bound  string `json:"bound,omitempty" enum:"at least,at most,"`
	Dice   int    `json:"dice"`   // or wafers, of a lot
	Misses int    `json:"misses"` // dice that were whole and have no reading of it
}

// EpiZone is the layer on a part of a wafer, as found die by die and put on the
// wafer's own estimate.
type EpiZone struct {
	Name           string `json:"name"`
	Dice           int    `json:"dice"`
	NetThicknessUM Number `json:"net_thickness_um"` // null where thickness is not observable
	DopingCM3      Number `json:"doping_cm3"`
}

// EpiSpread compares wafers with one another, where what is common to all drops out.
type EpiSpread struct {
	Differ         bool     `json:"differ"`
	NetThicknessUM Range    `json:"net_thickness_um"` // lowest to highest wafer
	DopingCM3      Range    `json:"doping_cm3"`
	Apart          []string `json:"apart"` // wafers that stand apart from the typical one
	Text           string   `json:"text"`
}

// Range is the lowest and the highest of several, and whose they are.
type Range struct {
	Lower   Number `json:"lower"`
	Upper   Number `json:"upper"`
	LowerOf string `json:"lower_of"`
	UpperOf string `json:"upper_of"`
}

// Disposition is the proposal: advice, never a release.
type Disposition struct {
	Proposal     string             `json:"proposal" enum:"release,release-after-screen,retest,hold,scrap-candidate,cannot-say"`
	Because      []string           `json:"because"`
	Wafers       []WaferDisposition `json:"wafers"`
	YieldIfFixed Interval           `json:"yield_if_fixed"`
}

// WaferDisposition is the proposal for one wafer.
type WaferDisposition struct {
	ID       string   `json:"id"`
	Proposal string   `json:"proposal" enum:"release,release-after-screen,retest,hold,scrap-candidate,cannot-say"`
	Because  []string `json:"because"`
}
