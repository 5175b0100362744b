package server

import (
	"context"
	"fmt"
	"log/slog"
	"runtime/debug"
	"time"

	"github.com/grpc-ecosystem/go-grpc-middleware/v2/interceptors/recovery"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/health"
	healthpb "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/keepalive"
	"google.golang.org/grpc/reflection"
	"google.golang.org/grpc/status"

	"lapgate/proto/inspectpb"
	"lapgate/server/alarm"
	"lapgate/server/intake"
	"lapgate/server/ledger"
	"lapgate/server/masters"
	"lapgate/server/retest"
)

// Deps are what the services stand on.
type Deps struct {
	Intake *intake.Intake
	Ledger *ledger.Store
	Book   *Book
	Feed   *Feed
	Log    *slog.Logger
	// Check says what is wrong with a recipe's text, as if it were saved.
	Check func(file string, text []byte) error
	Now   func() time.Time

	Gate     *masters.Gate // the one that intake asks
	Stations *Stations
	People   People
	// Retest registers the showings of a unit; nil = none are.
	Retest *retest.Keeper
	// Alarms watches stations over many units; nil = nothing does.
	Alarms *alarm.Watch
	// OutsideStages returns the stages in processes of their own; nil = there are none.
	OutsideStages func() []OutsideStage
}

// Inspection implements inspectpb.InspectionServiceServer.
type Inspection struct {
	inspectpb.UnimplementedInspectionServiceServer
	deps Deps
}

// Recipes implements inspectpb.RecipeServiceServer.
type Recipes struct {
	inspectpb.UnimplementedRecipeServiceServer
	deps Deps
}

// Yield implements inspectpb.YieldServiceServer.
type Yield struct {
	inspectpb.UnimplementedYieldServiceServer
	deps Deps
}

// GRPCOptions are the settings of the gRPC server.
type GRPCOptions struct {
	MaxMessageBytes int  // of one message; a unary call carries a whole unit
	MaxStreams      int  // concurrent calls of one connection
	Reflection      bool // let clients list the services
}

// readBytes is what is read from a connection at once: frames come in chunks of just under
// 1 MiB. The windows of HTTP/2 are left to gRPC, which measures what the connection bears.
const readBytes = 256 << 10

// NewGRPC returns a gRPC server with all services, standard health and, if wanted,
// reflection. A panic in a call is logged with its stack and answered as Internal.
func NewGRPC(d Deps, o GRPCOptions) (*grpc.Server, *health.Server) {
	onPanic := recovery.WithRecoveryHandlerContext(func(_ context.Context, p any) error {
		d.Log.Error("panic in a call", "panic", fmt.Sprint(p), "stack", string(debug.Stack()))
		return status.Error(codes.Internal, "the server failed in this call; its log says how")
	})
	g := grpc.NewServer(
		grpc.ForceServerCodecV2(inspectpb.Codec{}), // pixels are copied once, to where they stay
		grpc.MaxRecvMsgSize(o.MaxMessageBytes),
		grpc.ReadBufferSize(readBytes),
		grpc.MaxConcurrentStreams(uint32(o.MaxStreams)),
		grpc.KeepaliveEnforcementPolicy(keepalive.EnforcementPolicy{MinTime: 10 * time.Second, PermitWithoutStream: true}),
		grpc.ChainUnaryInterceptor(recovery.UnaryServerInterceptor(onPanic)),
		grpc.ChainStreamInterceptor(recovery.StreamServerInterceptor(onPanic)),
	)
	g.RegisterService(inspectionService(), &Inspection{deps: d})
	inspectpb.RegisterRecipeServiceServer(g, &Recipes{deps: d})
	inspectpb.RegisterYieldServiceServer(g, &Yield{deps: d})
	inspectpb.RegisterVolumeServiceServer(g, &Volume{deps: d})
	inspectpb.RegisterMasterServiceServer(g, &Masters{deps: d})
	h := health.NewServer()
	healthpb.RegisterHealthServer(g, h)
	if o.Reflection {
		reflection.Register(g)
	}
	return g, h
}
