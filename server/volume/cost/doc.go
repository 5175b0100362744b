// Package cost works out what one combination of process and inspection costs
// in one world, for any quantity. It knows no uncertainty and no ranking.
//
// Every cost is per good unit shipped: total over conforming units shipped.
// Nonconforming units that slip through are shipped besides and are charged as
// escapes. Looks at one unit are independent but for same_result_share.
package cost
