// Package spool keeps frames on disk until their verdict came, so that neither a
// missing server nor a power cut loses one. It knows nothing of servers and streams.
package spool
