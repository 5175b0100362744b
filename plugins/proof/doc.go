// Package proof is the stage that proves of a view, before its defects count, that the
// light was there, that the frames are new and whole, and that the camera looks where it
// did when it was calibrated. It finds no part and no defect.
//
// light: the mean of (frame − dark) over a diffuse patch in the field that the lamp lights,
// against the calibration's; or a photodiode's value in the header's tags against its
// nominal. A dark-field frame's own level is the part's haze and proves nothing.
//
// live data: no row, column or block of one value, no row twice, not bit for bit an earlier
// frame of the station, no gap in the frame counter where its step is stated.
//
// pattern: the calibration's pixels that stand out of their neighbours still do, by as much.
//
// light and pattern have bounds for a warning inside those for a hold (package drift). Every
// frame of a sequence is looked at, and the one furthest out is the proof.
//
// What earlier frames looked like is kept in memory, per station and camera. After a start
// or a new recipe it is taken from what the server has on record.
package proof
