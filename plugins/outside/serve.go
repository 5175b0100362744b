package outside

import (
	"fmt"
	"os"
	"time"

	"github.com/hashicorp/go-hclog"
	"github.com/hashicorp/go-plugin"
	"google.golang.org/grpc"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// Serve makes this process the stage of a factory until its host lets go of it. It is
// all that main does; it does not return. The stage is the one that runs inside, with
// the same factory; what it prints on stderr is its log.
func Serve(factory pipeline.Factory) {
	keepFromChildren()
	s, err := newService(factory)
	if err != nil {
		fmt.Fprintf(os.Stderr, "stage %s cannot be served: %v\n", factory.Type, err)
		os.Exit(2)
	}
	serveContract(s)
}

func serveContract(s stagepb.StageServiceServer) {
	go endWithParent()
	plugin.Serve(&plugin.ServeConfig{
		HandshakeConfig:  handshake(),
		VersionedPlugins: versions(link{service: s}),
		Logger:           hclog.New(&hclog.LoggerOptions{Level: hclog.Warn, Output: os.Stderr}),
		GRPCServer: func(o []grpc.ServerOption) *grpc.Server {
			return grpc.NewServer(append(o, grpc.MaxRecvMsgSize(maxMessage), grpc.MaxSendMsgSize(maxMessage))...)
		},
	})
	os.Exit(0)
}

// endWithParent ends the process when its parent has died, where no signal does that.
func endWithParent() {
	parent := os.Getppid()
	for range time.Tick(time.Second) {
		if os.Getppid() != parent {
			os.Exit(3)
		}
	}
}
