package outside

import (
	"context"

	"github.com/hashicorp/go-plugin"
	"google.golang.org/grpc"

	"lapgate/proto/stagepb"
)

// ContractVersion is the version of the stage contract that this program speaks.
const ContractVersion = 1

const (
	cookieKey   = "LAPGATE_STAGE"
	cookieValue = "a stage of its own"
	serviceName = "stage"

	// maxMessage bounds one message where pixels travel in it.
	maxMessage = 1 << 30
	// maxAnswer bounds an answer whose pixels are in shared memory.
	maxAnswer = 64 << 20

	// The memory files as the stage's process inherits them.
	inputPath  = "/proc/self/fd/3"
	outputPath = "/proc/self/fd/4"
	arenaPath  = "/proc/self/fd/5"
)

func handshake() plugin.HandshakeConfig {
	return plugin.HandshakeConfig{ProtocolVersion: ContractVersion, MagicCookieKey: cookieKey, MagicCookieValue: cookieValue}
}

// link ties the contract to the launcher on both sides; service is nil in the host.
type link struct {
	plugin.NetRPCUnsupportedPlugin
	service stagepb.StageServiceServer
}

func (l link) GRPCServer(_ *plugin.GRPCBroker, s *grpc.Server) error {
	stagepb.RegisterStageServiceServer(s, l.service)
	return nil
}

func (l link) GRPCClient(_ context.Context, _ *plugin.GRPCBroker, conn *grpc.ClientConn) (any, error) {
	return stagepb.NewStageServiceClient(conn), nil
}

func versions(l link) map[int]plugin.PluginSet {
	return map[int]plugin.PluginSet{ContractVersion: {serviceName: l}}
}
