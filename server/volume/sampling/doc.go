// Package sampling has acceptance sampling by attributes: ISO 2859-1 single
// plans, operating characteristics and continuous sampling. It knows no costs.
package sampling
