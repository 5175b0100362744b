// Package server is the gRPC services: each call is decode, call, encode. It judges
// nothing and keeps nothing itself.
package server
