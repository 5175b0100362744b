// Package report draws pages and pictures for a unit, a lot and a plan from values it
// is given; it asks no ledger and judges nothing.
package report
