// Package calibrate makes a calibration from folders of frames, and reads and writes
// its folder. It corrects no frames of parts and judges none.
//
// With N frames of each kind, all taken with the same camera settings:
//
//	dark     = mean of the frames with the lamp off
//	stray    = mean of the frames with the lamp on and no part − dark
//	response = (mean of the frames of a diffuser − dark) / norm
//
// norm is the mean of (response frames − dark) over all pixels that are not bad, so
// that the response has mean 1 there. Stray light is not taken out of the response:
// a diffuser is brighter by orders of magnitude. Few response frames add their own
// noise: a correction from N frames leaves a spread of √(1 + 1/N) times the noise of
// one frame.
//
// What else frames can tell, each where it was taken: a ramp of pairs the figures of EMVA
// Standard 1288 (package emva); a dot target scale and distortion, and one with known
// diameters the sizing curve (package dots); frames of a conforming part the width of its edge
// and its diameter; a reference patch the light; sidecars the camera's temperature. The
// pixels that stand out most are kept to tell the sensor by (package drift).
package calibrate
