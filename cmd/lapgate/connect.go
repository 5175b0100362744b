package main

import (
	"context"
	"encoding/json"
	"io"
	"os"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"
	"google.golang.org/grpc/backoff"
	"google.golang.org/grpc/credentials/insecure"

	"lapgate/proto/inspectpb"
)

const (
	defaultServer = "127.0.0.1:7391"
	serverEnv     = "LAPGATE_SERVER"
	maxAnswer     = 64 << 20 // bytes of one message from the server
)

// serverFlag adds --server, whose default the environment can set.
func serverFlag(c *cobra.Command) *string {
	address := os.Getenv(serverEnv)
	if address == "" {
		address = defaultServer
	}
	return c.Flags().String("server", address, "address of lapgated, host:port or unix:///path; also "+serverEnv)
}

// connect returns a connection that is made when it is first used, and made again
// within seconds after it broke.
func connect(server string) (*grpc.ClientConn, error) {
	return grpc.NewClient(server,
		grpc.WithTransportCredentials(insecure.NewCredentials()),
		grpc.WithDefaultCallOptions(grpc.MaxCallRecvMsgSize(maxAnswer), grpc.ForceCodecV2(inspectpb.Codec{})),
		grpc.WithConnectParams(grpc.ConnectParams{
			Backoff:           backoff.Config{BaseDelay: 100 * time.Millisecond, Multiplier: 2, Jitter: 0.2, MaxDelay: 2 * time.Second},
			MinConnectTimeout: 5 * time.Second,
		}))
}

// ask connects, calls, and returns the server's error in the program's own terms.
func ask(ctx context.Context, server string, call func(context.Context, *grpc.ClientConn) error) error {
	conn, err := connect(server)
	if err != nil {
		return err
	}
	defer conn.Close()
	return inspectpb.ToError(call(ctx, conn))
}

// writeJSON writes one document.
func writeJSON(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(v)
}
