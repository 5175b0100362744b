// Package volume evaluates a volume plan: what a good unit costs at every
// quantity for every way of making and inspecting it, and how sure that is. It
// is arithmetic only and reads no file, ledger or clock.
package volume
