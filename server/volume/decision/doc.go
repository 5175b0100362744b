// Package decision has the economics of inspecting and of knowing more:
// all-or-none rules, loss functions, value of information. It knows no plan.
package decision
