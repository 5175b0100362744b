package pipeline

import "slices"

// Names of the proofs that the engine and the built-in stages give.
const (
	ProofLight    = "light"     // the lamp reached the calibrated level
	ProofPart     = "part"      // a part of the right size lay there
	ProofFocus    = "focus"     // its edge is sharp
	ProofScale    = "scale"     // it looks as large as when calibrated
	ProofLive     = "live data" // the frame is new and whole
	ProofSettings = "settings"  // the camera was set as for the calibration
	ProofPattern  = "pattern"   // the sensor's own marks are where the calibration has them
	ProofEvenness = "evenness"  // the surface is as even as a polished one
)

// RequiredProofs returns what every view must prove before its unit can be accepted,
// unless the recipe states proofs: none for the view.
func RequiredProofs() []string { return []string{ProofLight, ProofPart, ProofLive} }

// demandProofs adds a failed proof for each one that the recipe demands and that no stage
// gave. A view that failed or is held anyway needs no further reason.
func demandProofs(v RecipeView, item *Item) {
	if v.NoProofs || slices.ContainsFunc(item.Proofs, func(p Proof) bool { return !p.OK }) {
		return
	}
	for _, name := range RequiredProofs() {
		if !slices.ContainsFunc(item.Proofs, func(p Proof) bool { return p.Name == name }) {
			item.Prove(Proof{Name: name, Reason: "no stage of the recipe proves it: add the stages proof and region (found_circle) to the view, or state proofs: none"})
		}
	}
}
