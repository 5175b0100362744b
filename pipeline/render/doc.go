// Package render draws frames of parts that do not exist, with the truth beside them:
// the simulated camera. It finds and judges nothing, and writes no files.
//
// Light is counted in DN above dark at nominal lamp power. A frame is
//
//	raw = clip(round(offset + S + N·sqrt(K·S + (K·σ_d)²)))
//	S   = lamp · gain · (vignetting · scene + stray)
//
// with N standard normal, K the system gain in DN per electron and σ_d the dark noise
// in electrons (the linear model of EMVA Standard 1288). Blur is applied to the scene
// in closed form, or per drawn patch, never over the whole frame.
package render
