// Package view turns a comparison into versioned plain data: the results file and what the page draws.
//
// In goes a compare.Comparison; out comes Results, which marshals to results.json (the contract printed by
// `modelmend schema`). It refuses nothing: what cannot be said is null beside a reason. Before it stands compare;
// after it chart, paper, page and cmd. Aggregates only: no value of a single row is ever put in.
package view

// Format and Version name the contract of results.json.
const (
	Format  = "modelmend-results"
	Version = 1
)

// Results is the whole results file. Lists are never null; a number that is not finite is null beside a reason.
// Estimates are in the units of the user's regressors and dependent variable.
type Results struct {
	Format        string          `json:"format"`
	Version       int             `json:"version"`
	Run           Run             `json:"run"`
	Equation      string          `json:"equation"`  // canonical text
	Dependent     string          `json:"dependent"` // canonical name
	Focal         []string        `json:"focal"`
	FocalDeclared bool            `json:"focalDeclared"` // false: the user named none and Focal is the most tangled regressor
	Purpose       string          `json:"purpose"`       // explain | predict | describe
	Invented      bool            `json:"invented"`      // true for the built-in studies
	Verdict       []string        `json:"verdict"`       // plain sentences, most important first
	Answers       Answers         `json:"answers"`       // the verdict by question
	Cautions      []Note          `json:"cautions"`
	Diagnosis     Diagnosis       `json:"diagnosis"`
	Alternatives  []Alternative   `json:"alternatives"`
	Simulations   Simulations     `json:"simulations"`
	Plans         []Plan          `json:"plans"` // what more data would bring, one a declared focal coefficient
	NotApplicable []NotApplicable `json:"notApplicable"`
	Advice        Advice          `json:"advice"`
	Notes         []Note          `json:"notes"`
	Cards         []Card          `json:"cards"` // one a remedy that is listed or not applicable, in order
}

// Answers holds one sentence a question; a sentence is empty where the question does not arise.
type Answers struct {
	Problem    []string `json:"problem"` // one a focal coefficient
	Tangles    string   `json:"tangles"`
	Sign       string   `json:"sign"`
	Prediction string   `json:"prediction"`
	Tuning     string   `json:"tuning"`
	Truth      string   `json:"truth"` // what the remedies do if the estimates were the truth
}

// Note is a remark that does not stop the analysis.
type Note struct {
	Code string `json:"code"`
	Text string `json:"text"`
}

// Run records what was read and how it was treated.
type Run struct {
	Tool           string      `json:"tool"` // "modelmend"
	ToolVersion    string      `json:"toolVersion"`
	Seed           int64       `json:"seed"`
	Folds          Folds       `json:"folds"`
	Resampling     Resampling  `json:"resampling"`
	StandardErrors []ErrorKind `json:"standardErrors"` // computed for every alternative, the chosen kind first
	Data           string      `json:"data"`           // as the user wrote it
	DataHash       string      `json:"dataHash"`       // "sha256:" and the hex digest of the bytes read
	Rows           Rows        `json:"rows"`
	Study          string      `json:"study"` // the effective study as YAML; running it again gives the same bytes
	LookedAt       int         `json:"lookedAt"`
}

// Folds says how rows were split. Assignment[repeat][row] is the 0-based fold in which each used row is held out, in file order, -1 where it never is
// (before the first fold of a rolling split); it is empty beside a reason above 10,000 used rows.
type Folds struct {
	Kind             string  `json:"kind"` // random | leave-one-out | clusters | blocks | rolling | column
	Count            int     `json:"count"`
	Repeats          int     `json:"repeats"`
	Gap              int     `json:"gap"` // periods left out before a held-out fold of a rolling split
	Inner            string  `json:"inner"`
	Assignment       [][]int `json:"assignment"`
	AssignmentReason string  `json:"assignmentReason,omitempty"`
}

// Rows counts what was read, used and set aside.
type Rows struct {
	Read     int        `json:"read"`
	Used     int        `json:"used"`
	SetAside []SetAside `json:"setAside"`
}

// SetAside counts rows left out for one reason; Column is empty where no one column is the cause.
type SetAside struct {
	Reason string `json:"reason"`
	Column string `json:"column"`
	Count  int    `json:"count"`
}

// Diagnosis says what is tangled with what, and what that costs.
type Diagnosis struct {
	Flagged          bool             `json:"flagged"` // a substantive or exact reason exists
	Reasons          []Reason         `json:"reasons"`
	Cutoffs          Cutoffs          `json:"cutoffs"`
	Uncentered       bool             `json:"uncentered"` // the model has no constant: factors and R2 are not centred
	Regressors       []Regressor      `json:"regressors"`
	Terms            []Term           `json:"terms"`
	ConditionIndexes ConditionIndexes `json:"conditionIndexes"`
	VarianceShares   VarianceShares   `json:"varianceShares"`
	NearDependencies []NearDependency `json:"nearDependencies"`
	Correlations     Correlations     `json:"correlations"`
	Ledger           []LedgerEntry    `json:"ledger"` // focal coefficients first, then the other regressors
	Digits           Num              `json:"digits"` // decimal digits the arithmetic can vouch for
}

// Reason is one ground for the flag, or a remark of the same form that does not flag.
type Reason struct {
	Kind string `json:"kind"` // substantive | structural | location | exact
	Text string `json:"text"`
}

// Cutoffs are the reference marks in force. They are rules of thumb.
type Cutoffs struct {
	VIF            Num    `json:"vif"`
	ConditionIndex Num    `json:"conditionIndex"`
	VarianceShare  Num    `json:"varianceShare"`
	Source         string `json:"source"`
}

// Regressor holds one column of the design, the constant left out.
type Regressor struct {
	Name                string `json:"name"`
	Term                string `json:"term"`
	Kind                string `json:"kind"` // number | function | power | product | ratio | dummy
	Focal               bool   `json:"focal"`
	Tangled             bool   `json:"tangled"` // member of a substantive or exact dependency, or vifCentered at the cut-off
	VIF                 Num    `json:"vif"`     // null when the column depends exactly on the others
	VIFReason           string `json:"vifReason,omitempty"`
	VIFCentered         Num    `json:"vifCentered"`     // with the variables of powers and products centred
	StructuralShare     Num    `json:"structuralShare"` // 1 - ln(vifCentered)/ln(vif), between 0 and 1
	Tolerance           Num    `json:"tolerance"`
	AuxiliaryR2         Num    `json:"auxiliaryR2"`
	StandardErrorFactor Num    `json:"standardErrorFactor"` // root of vif
	Mean                Num    `json:"mean"`
	SD                  Num    `json:"sd"` // divisor n-1
}

// Term is a group of columns that belong together: the powers and products that share a variable, or a category.
type Term struct {
	Name           string   `json:"name"`
	Columns        []string `json:"columns"`
	Degrees        int      `json:"degrees"`
	GeneralizedVIF Num      `json:"generalizedVIF"` // the determinant ratio; it never clears a pair inside the group
	PerDegree      Num      `json:"perDegree"`      // generalizedVIF^(1/degrees), on the VIF scale
}

// ConditionIndexes lists scaled condition indexes from 1 upwards; null stands for infinite.
type ConditionIndexes struct {
	ScaledWithConstant []Num `json:"scaledWithConstant"`
	Centered           []Num `json:"centered"`
}

// VarianceShares has one row a coefficient; each row sums to 1 over the dimensions.
type VarianceShares struct {
	Coefficients []string `json:"coefficients"` // "constant" first where there is one
	Dimensions   []Num    `json:"dimensions"`   // the condition index of each column of Shares
	Shares       [][]Num  `json:"shares"`
}

// NearDependency is a relation among regressors in the user's units: Left = Constant + sum of value*name.
type NearDependency struct {
	Left           string       `json:"left"`
	Constant       Num          `json:"constant"`
	Coefficients   []NamedValue `json:"coefficients"`
	Equation       string       `json:"equation"`
	R2             Num          `json:"r2"`
	RowsHolding    int          `json:"rowsHolding"` // rows in which a simple equation holds to the data's own decimals; 0 when not simple
	RowsUsed       int          `json:"rowsUsed"`
	Exceptions     []int        `json:"exceptions"` // file lines, at most ten
	Kind           string       `json:"kind"`       // substantive | structural | location | exact
	Members        []string     `json:"members"`
	ConditionIndex Num          `json:"conditionIndex"`
}

// NamedValue is one coefficient of an equation.
type NamedValue struct {
	Name  string `json:"name"`
	Value Num    `json:"value"`
}

// Correlations holds the correlation matrix of the regressors, with the dependent variable last.
type Correlations struct {
	Names  []string `json:"names"`
	Values [][]Num  `json:"values"`
}

// LedgerEntry splits the standard error of one coefficient into its four causes:
// standardError = residualSD / (sqrt(rows-1) * ownSD) * sqrt(vif).
type LedgerEntry struct {
	Coefficient            string        `json:"coefficient"`
	Focal                  bool          `json:"focal"`
	Estimate               Num           `json:"estimate"`
	ResidualSD             Num           `json:"residualSD"`
	Rows                   int           `json:"rows"`
	OwnSD                  Num           `json:"ownSD"`
	VIF                    Num           `json:"vif"`
	StandardError          Num           `json:"standardError"`
	StandardErrorUntangled Num           `json:"standardErrorUntangled"`
	Low                    Num           `json:"low"`
	High                   Num           `json:"high"`
	LowUntangled           Num           `json:"lowUntangled"`
	HighUntangled          Num           `json:"highUntangled"`
	SmallestEffect         Num           `json:"smallestEffect"`
	ConclusionChanges      bool          `json:"conclusionChanges"` // by the chosen kind of standard error
	Others                 []LedgerOther `json:"others"`            // kinds other than the classical
	Reason                 string        `json:"reason,omitempty"`
	Sentence               string        `json:"sentence"`
}

// LedgerOther sets one kind of standard error beside what it would be untangled, at the same residuals.
type LedgerOther struct {
	Kind                   string `json:"kind"`
	StandardError          Num    `json:"standardError"`
	Factor                 Num    `json:"factor"` // realised: standardError over standardErrorUntangled
	StandardErrorUntangled Num    `json:"standardErrorUntangled"`
	Low                    Num    `json:"low"`
	High                   Num    `json:"high"`
	LowUntangled           Num    `json:"lowUntangled"`
	HighUntangled          Num    `json:"highUntangled"`
	ConclusionChanges      bool   `json:"conclusionChanges"`
	Reason                 string `json:"reason,omitempty"`
}

// Alternative is one remedy fitted to the common problem.
type Alternative struct {
	Key               string          `json:"key"`    // remedy, remedy:what or remedy:what:how
	Remedy            string          `json:"remedy"` // as-is | drop | drop-by-rule | select | center | index | components | partial-least-squares | ridge | elastic-net
	Label             string          `json:"label"`  // short, for a rung
	Summary           string          `json:"summary"`
	Coefficients      []Coefficient   `json:"coefficients"` // the constant first where there is one, then every regressor, the same order everywhere
	Derived           []Coefficient   `json:"derived"`      // "effect of x" at the means, and an index's own coefficient
	Covariance        [][]Num         `json:"covariance"`   // in the order of Coefficients; empty beside a reason when not available
	CovarianceReason  string          `json:"covarianceReason,omitempty"`
	ResidualSD        Num             `json:"residualSD"` // the s behind the standard errors
	FitRMSE           Num             `json:"fitRMSE"`    // root mean squared residual of this fit on all rows
	R2                Num             `json:"r2"`
	DegreesOfFreedom  Num             `json:"degreesOfFreedom"`
	StandardErrorKind string          `json:"standardErrorKind"` // classical | robust | clustered | autocorrelation
	OutOfSample       OutOfSample     `json:"outOfSample"`
	Tuning            *Tuning         `json:"tuning"` // null where nothing is tuned
	Tests             []Test          `json:"tests"`
	Meaning           []Meaning       `json:"meaning"`
	Costs             []string        `json:"costs"`
	BreakEven         []BreakEven     `json:"breakEven"`     // of focal coefficients, under linear restrictions
	WorstCoverage     []WorstCoverage `json:"worstCoverage"` // of focal coefficients, when a regressor is dropped for its t-ratio
	Notes             []Note          `json:"notes"`
	Removes           []string        `json:"removes"` // columns that a drop removes
	Weights           []NamedValue    `json:"weights"` // index weights on raw units
	Simulation        []Simulation    `json:"simulation"`
}

// Coefficient is one coefficient under one alternative.
type Coefficient struct {
	Name                string          `json:"name"`
	Estimate            Num             `json:"estimate"`
	StandardError       Num             `json:"standardError"`
	StandardErrorReason string          `json:"standardErrorReason,omitempty"`
	TRatio              Num             `json:"tRatio"`
	PValue              Num             `json:"pValue"`
	Low                 Num             `json:"low"`
	High                Num             `json:"high"`
	Status              string          `json:"status"` // estimated | implied | zero | different quantity | not identified
	EstimatedBias       Num             `json:"estimatedBias"`
	EstimatedMSE        Num             `json:"estimatedMSE"`
	PosteriorSD         Num             `json:"posteriorSD"`
	Errors              []StandardError `json:"errors"`    // every kind computed, the chosen one first; empty for a coefficient set to zero or not identified
	Resampled           *Resampled      `json:"resampled"` // null when the procedure was not resampled, or the coefficient is zero in every resample
}

// StandardError is the standard error of one kind.
type StandardError struct {
	Kind          string `json:"kind"`
	StandardError Num    `json:"standardError"`
	Reason        string `json:"reason,omitempty"`
	Degrees       Num    `json:"degrees"` // of freedom of the t distribution behind the interval
	TRatio        Num    `json:"tRatio"`
	PValue        Num    `json:"pValue"`
	Low           Num    `json:"low"`
	High          Num    `json:"high"`
}

// ErrorKind says how one kind of standard error is formed.
type ErrorKind struct {
	Kind    string `json:"kind"`
	Text    string `json:"text"`
	Warning string `json:"warning,omitempty"`
}

// Resampled holds the spread of one coefficient when the whole procedure, tuning and selection included, is repeated on resampled rows.
type Resampled struct {
	StandardError Num    `json:"standardError"` // standard deviation over the resamples
	Low           Num    `json:"low"`           // 2.5 % point
	High          Num    `json:"high"`          // 97.5 % point
	BiasCorrected Limits `json:"biasCorrected"` // and accelerated; null where it cannot be formed
	SharePositive Num    `json:"sharePositive"`
	ShareNegative Num    `json:"shareNegative"`
	ShareZero     Num    `json:"shareZero"` // in which the coefficient was set to zero: one less this is how often it was kept
	Used          int    `json:"used"`      // resamples in which the coefficient had a value
}

// Limits are the ends of an interval.
type Limits struct {
	Low  Num `json:"low"`
	High Num `json:"high"`
}

// Resampling says how the procedure was repeated.
type Resampling struct {
	Count int    `json:"count"` // 0: not resampled
	Drawn string `json:"drawn"` // what is drawn with replacement
	Units int    `json:"units"` // how many of them there are
	Block int    `json:"block"` // periods in a block; 1 where nothing is drawn in blocks
	Folds int    `json:"folds"` // inner folds in which tuning is chosen again
	Text  string `json:"text"`
}

// TuningResampled is how often each value of the path was chosen in the resamples.
type TuningResampled struct {
	Low    Num   `json:"low"` // 2.5, 50 and 97.5 % points of the chosen values
	Median Num   `json:"median"`
	High   Num   `json:"high"`
	Shares []Num `json:"shares"` // in the order of Path
}

// OutOfSample is the cross-validated error, everything learned inside the training rows.
type OutOfSample struct {
	RMSE           Num         `json:"rmse"`
	R2             Num         `json:"r2"`
	Difference     Difference  `json:"difference"` // alternative minus as-is, mean squared error; negative is better
	RMSEDifference Num         `json:"rmseDifference"`
	Folds          []FoldError `json:"folds"`
	Reason         string      `json:"reason,omitempty"` // why the errors in Folds are null
	Apart          *ErrorApart `json:"apart"`            // null unless the folds asked for put what belongs together on both sides
}

// ErrorApart is the error with folds that keep clusters, or stretches of time, together: what random folds hide.
type ErrorApart struct {
	Kind           string     `json:"kind"` // clusters | blocks | rolling
	RMSE           Num        `json:"rmse"`
	R2             Num        `json:"r2"`
	Difference     Difference `json:"difference"`
	RMSEDifference Num        `json:"rmseDifference"`
}

// Difference is a paired difference with its overlap-corrected interval.
type Difference struct {
	Scale    string `json:"scale"` // mse
	Estimate Num    `json:"estimate"`
	Low      Num    `json:"low"`
	High     Num    `json:"high"`
}

// FoldError is the mean squared error on one held-out fold. Repeat and Fold count from 0.
type FoldError struct {
	Repeat int `json:"repeat"`
	Fold   int `json:"fold"`
	Rows   int `json:"rows"`
	MSE    Num `json:"mse"`
	Chosen Num `json:"chosen"` // the tuning chosen inside this fold; null where nothing is tuned
}

// Tuning says how the penalty or the number of components was chosen, and what every other choice gives.
type Tuning struct {
	Parameter        string           `json:"parameter"` // penalty | components
	Rule             string           `json:"rule"`      // cross-validation | fixed by the user
	Penalty          Num              `json:"penalty"`
	PenaltyTimes     Num              `json:"penaltyTimes"` // penalty * (n-1): the multiplier of each regressor's variance in the sum of squares; null where the penalty is not on squares alone
	Components       Num              `json:"components"`
	EffectiveDegrees Num              `json:"effectiveDegrees"` // null where no formula gives them
	Chosen           int              `json:"chosen"`           // index into Path
	Candidates       []RuleValue      `json:"candidates"`
	Path             []PathPoint      `json:"path"`
	AsGoodAs         AsGoodAs         `json:"asGoodAs"`
	Resampled        *TuningResampled `json:"resampled"` // null where the value is fixed or nothing was resampled
	Spectrum         []ComponentInfo  `json:"spectrum"`  // components only
}

// RuleValue is the value which another published rule would choose.
type RuleValue struct {
	Rule  string `json:"rule"` // leave-one-out | generalized-cross-validation | hoerl-kennard-baldwin | lawless-wang | one-standard-error
	Title string `json:"title"`
	Value Num    `json:"value"`
}

// PathPoint is the fit at one value of the tuning. Coefficients are in the order of Alternative.Coefficients.
type PathPoint struct {
	Value            Num               `json:"value"`
	Error            Num               `json:"error"`   // cross-validated mean squared error at this value, not nested
	ErrorSD          Num               `json:"errorSD"` // its standard error over the splits
	EffectiveDegrees Num               `json:"effectiveDegrees"`
	Coefficients     []PathCoefficient `json:"coefficients"`
	Derived          []PathCoefficient `json:"derived"` // in the order of Alternative.Derived
}

// PathCoefficient is one coefficient at one point of a path.
type PathCoefficient struct {
	Estimate      Num `json:"estimate"`
	StandardError Num `json:"standardError"`
	EstimatedBias Num `json:"estimatedBias"`
	EstimatedMSE  Num `json:"estimatedMSE"`
}

// AsGoodAs is the range of tuning values (indexes into Path) whose error is within one standard error of the smallest.
type AsGoodAs struct {
	From     int    `json:"from"`
	To       int    `json:"to"`
	Sentence string `json:"sentence"`
}

// ComponentInfo describes one principal component of the standardised regressors.
type ComponentInfo struct {
	Component int   `json:"component"` // from 1
	Variance  Num   `json:"variance"`  // eigenvalue of the correlation matrix
	Share     Num   `json:"share"`     // of the regressors' variance
	TRatio    Num   `json:"tRatio"`    // of this component for the dependent variable, with the as-is residual variance
	Loadings  []Num `json:"loadings"`  // on the regressors in order, unit length
	Kept      bool  `json:"kept"`
}

// Test is one test of what the alternative imposes.
type Test struct {
	Name          string `json:"name"` // restriction | strong-mse | weak-mse | single-t
	Statistic     Num    `json:"statistic"`
	Degrees       []Num  `json:"degrees"`
	PValue        Num    `json:"pValue"`
	Critical      Num    `json:"critical"`      // at 5 %; null where none is stated
	Noncentrality Num    `json:"noncentrality"` // the largest that the hypothesis allows
	Text          string `json:"text"`
}

// BreakEven is how large the bias of a coefficient may be before what the alternative imposes raises its mean squared error.
type BreakEven struct {
	Coefficient string `json:"coefficient"`
	Bias        Num    `json:"bias"`
	Estimated   Num    `json:"estimated"` // how far the estimate moves
	Effect      Num    `json:"effect"`    // the same in terms of the dropped regressor's true coefficient; null unless one is dropped
	Text        string `json:"text"`
}

// WorstCoverage is the least coverage of a nominal 95 % interval when a regressor is dropped only because its |t| is below 1.96.
type WorstCoverage struct {
	Coefficient string `json:"coefficient"`
	Correlation Num    `json:"correlation"` // of the two estimates when left alone
	Coverage    Num    `json:"coverage"`
	TrueT       Num    `json:"trueT"` // where it is reached
	Text        string `json:"text"`
}

// Meaning says what a coefficient now means.
type Meaning struct {
	Coefficient string `json:"coefficient"`
	Text        string `json:"text"`
}

// Simulation holds what an alternative does to one coefficient if one truth held at the user's own design; each figure has its Monte Carlo standard
// error beside it.
type Simulation struct {
	Truth          string `json:"truth"` // as-estimated | focal-zero | focal-smallest | halfway
	Coefficient    string `json:"coefficient"`
	True           Num    `json:"true"`
	Bias           Num    `json:"bias"`
	BiasError      Num    `json:"biasError"`
	SD             Num    `json:"sd"`
	SDError        Num    `json:"sdError"`
	RMSE           Num    `json:"rmse"`
	RMSEError      Num    `json:"rmseError"`
	Coverage       Num    `json:"coverage"` // of the nominal 95 % interval given the tuning, classical errors
	CoverageError  Num    `json:"coverageError"`
	WrongSign      Num    `json:"wrongSign"` // null where the true value is zero
	WrongSignError Num    `json:"wrongSignError"`
}

// Simulations says what was simulated.
type Simulations struct {
	Count  int     `json:"count"` // samples for each truth; 0 beside a reason
	Truths []Truth `json:"truths"`
	Reason string  `json:"reason,omitempty"`
	Text   string  `json:"text"`
}

// Truth is what the samples of a simulation are drawn from.
type Truth struct {
	Name string `json:"name"`
	Text string `json:"text"`
}

// Plan says how many rows a narrower interval would take, and where a new row would help most.
type Plan struct {
	Coefficient string       `json:"coefficient"`
	HalfWidth   Num          `json:"halfWidth"` // of the 95 % interval when left alone
	Targets     []PlanTarget `json:"targets"`
	Direction   []NamedValue `json:"direction"` // offsets from the means; their root mean square is one standard deviation; empty beside a reason
	Gain        Num          `json:"gain"`      // share by which that row narrows the standard error
	Reason      string       `json:"reason,omitempty"`
	Text        string       `json:"text"`
}

// PlanTarget is a half width and the rows it takes.
type PlanTarget struct {
	What      string `json:"what"`
	HalfWidth Num    `json:"halfWidth"`
	Rows      Num    `json:"rows"`
	Untangled Num    `json:"untangled"`
}

// NotApplicable is a remedy that does not apply here, and why.
type NotApplicable struct {
	Key    string `json:"key"`
	Remedy string `json:"remedy"`
	Reason string `json:"reason"`
}

// Advice is the tool's reading for the declared purpose; Recommended is empty when it gives none, beside a reason.
type Advice struct {
	Purpose     string   `json:"purpose"`
	Recommended string   `json:"recommended"` // key of an alternative
	RunnerUp    string   `json:"runnerUp"`
	Reasons     []string `json:"reasons"`
	WouldChange []string `json:"wouldChange"`
}

// Card is the standing description of a remedy.
type Card struct {
	Key      string   `json:"key"`
	Title    string   `json:"title"`
	Does     string   `json:"does"`
	Assumes  string   `json:"assumes"`
	Buys     string   `json:"buys"`
	Costs    string   `json:"costs"`
	Means    string   `json:"means"`
	Referee  string   `json:"referee"`
	Sources  []string `json:"sources"`
	Options  []Option `json:"options"`
	Variants []string `json:"variants"` // keys of the alternatives it made here
}

// Option is one setting of a remedy.
type Option struct {
	Key  string `json:"key"` // as in --set ridge.penalty=...
	Text string `json:"text"`
}
