// Package intake takes frames in: it admits them by bytes, puts the views of a
// showing together, runs them on a bounded pool of workers and answers once the
// ledger has the verdict. It knows no wire format.
package intake
