package pipeline

import "time"

// Evidence is everything that an inspection found. Judging it is a pure function.
type Evidence struct {
	Views        []ViewEvidence `json:"views"`
	Defects      []Defect       `json:"defects"` // after merge and classify
	Measurements []Measurement  `json:"measurements"`
	Coverage     float64        `json:"coverage"` // the smallest share of all views
	Failures     []Failure      `json:"failures"`
	Truncated    bool           `json:"truncated"`
	Saturated    bool           `json:"saturated"`
}

// ViewEvidence is what one view showed.
type ViewEvidence struct {
	Name         string             `json:"name"`
	Frames       []FrameEvidence    `json:"frames"`
	UMPerPx      float64            `json:"um_per_px"`
	Calibration  string             `json:"calibration"` // hash; empty where the recipe states "none"
	Region       RegionEvidence     `json:"region"`
	Coverage     Coverage           `json:"coverage"`
	CoverageMap  *CoverageMap       `json:"coverage_map,omitempty"`
	Proofs       []Proof            `json:"proofs"`
	Measurements []Measurement      `json:"measurements"`
	Defects      []Defect           `json:"defects"` // before merge
	Truncated    bool               `json:"truncated"`
	Milliseconds map[string]float64 `json:"milliseconds"` // stage → ms
}

// FrameEvidence is a frame's header without its pixels, and where the frame is kept.
type FrameEvidence struct {
	Header FrameHeader `json:"header"`
	Stored string      `json:"stored"` // key in the image store; empty = not kept
}

// RegionEvidence is the region that was inspected.
type RegionEvidence struct {
	CentreX  float64        `json:"centre_x"`
	CentreY  float64        `json:"centre_y"`
	RadiusPx float64        `json:"radius_px"`
	Zones    []ZoneEvidence `json:"zones"`
}

// ZoneEvidence is a zone without its pixels.
type ZoneEvidence struct {
	Name                 string  `json:"name"`
	AreaMM2              float64 `json:"area_mm2"`
	EquivalentDiameterMM float64 `json:"equivalent_diameter_mm"`
	// Of a zone about the part's centre; outer 0 = it is no circle.
	OuterDiameterMM float64 `json:"outer_diameter_mm,omitempty"`
	InnerDiameterMM float64 `json:"inner_diameter_mm,omitempty"`
}

// Failure is something that kept a view or unit from being inspected. It is a hold.
type Failure struct {
	Reason string `json:"reason"` // "missing view", "stage failed", "late", "shutdown" …
	View   string `json:"view"`
	Stage  string `json:"stage"`
	Detail string `json:"detail"` // what happened, with the last log lines where there are any
}

// Verdict is what a judgement says.
type Verdict string

// The verdicts.
const (
	Accept Verdict = "accept"
	Reject Verdict = "reject"
	Hold   Verdict = "hold"
)

// Reason is one broken limit, or one thing that was not proven.
type Reason struct {
	Name     string  `json:"name"`    // the limit's name, or the cause of the hold
	Verdict  Verdict `json:"verdict"` // what this reason alone calls for: reject or hold
	Text     string  `json:"text"`    // a sentence for a person
	Zone     string  `json:"zone"`
	DefectID int     `json:"defect_id"` // 0 = concerns no single defect
	Value    float64 `json:"value"`
	Limit    float64 `json:"limit"`
	Over     float64 `json:"over"` // Value − Limit, positive when broken upwards
	Unit     string  `json:"unit"`
	Rule     string  `json:"rule"` // the rule as written, or the rule of accumulation
}

// Judges: who made a judgement.
const (
	ByLine      = "line"
	ByCandidate = "candidate"
	ByRejudge   = "rejudge"
	ByPerson    = "person"
)

// Judgement is a verdict with its reasons and everything needed to say where it came from.
type Judgement struct {
	Verdict        Verdict           `json:"verdict"`
	Reasons        []Reason          `json:"reasons"`
	By             string            `json:"by"`     // ByLine, ByCandidate, ByRejudge or ByPerson
	Person         string            `json:"person"` // who, when By is ByPerson
	Recipe         string            `json:"recipe"` // text hash
	DetectionHash  string            `json:"detection_hash"`
	JudgingHash    string            `json:"judging_hash"`
	ProgramVersion string            `json:"program_version"`
	StageVersions  map[string]string `json:"stage_versions"`
	At             time.Time         `json:"at"`
}

// Judge turns evidence into a verdict. It must be pure and safe for concurrent use.
type Judge interface {
	Judge(Evidence) (Verdict, []Reason)
	// Canonical returns the judging settings in a fixed form, for the judging hash.
	Canonical() []byte
}
