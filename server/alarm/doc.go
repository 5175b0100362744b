// Package alarm watches stations over many units, by what the ledger has of them: a defect at
// one place of the camera on successive units is dirt or a hot pixel, and a reading that
// drifts is warned of before it holds. It judges no unit.
//
// Same place. Of each station and view the places of defects in the camera's frame as
// received are compared, with no rotation undone: what sits on the part turns and shifts
// with it, what sits on lens, window or sensor does not. When so many successive different
// units show a defect at one place an alarm is recorded; when as many show none there it is
// cleared. A showing whose view failed or was not proven says nothing, nor does a unit whose
// inspected region leaves the place out. After a start the latest units on record are
// taken up, so nothing is forgotten. An alarm holds no unit unless the settings say so.
//
// Drift. Light, focus, scale and fixed pattern have bounds of their own for each unit
// (pipeline/drift). Here their straight line over time is followed to the bound of a hold:
// over the latest units, and over a week or since lamp, lens or camera were changed.
package alarm
