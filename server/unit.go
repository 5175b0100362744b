package server

import (
	"context"

	"google.golang.org/grpc"

	"lapgate/proto/inspectpb"
	"lapgate/server/intake"
)

// InspectUnit implements InspectionService for a caller that holds the whole message in
// memory. From the network the frames come by inspectIncoming.
func (s *Inspection) InspectUnit(ctx context.Context, req *inspectpb.InspectUnitRequest) (*inspectpb.InspectUnitResponse, error) {
	in := &inspectpb.IncomingUnit{}
	for _, f := range req.Frames {
		in.Frames = append(in.Frames, inspectpb.IncomingFrame{Header: f.GetHeader(), Pieces: [][]byte{f.GetData()}})
	}
	return s.inspectUnit(ctx, in)
}

func (s *Inspection) inspectUnit(ctx context.Context, in *inspectpb.IncomingUnit) (*inspectpb.InspectUnitResponse, error) {
	var frames []intake.Sent
	for _, f := range in.Frames {
		h, err := inspectpb.ToFrameHeader(f.Header)
		if err != nil {
			return nil, inspectpb.ToStatus(err)
		}
		frames = append(frames, intake.Sent{Header: h, Pieces: f.Pieces})
	}
	wait, err := s.deps.Intake.Show(frames)
	in.Free() // the pixels are where they stay
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	v, err := wait(ctx)
	if err != nil {
		return nil, inspectpb.ToStatus(err)
	}
	return &inspectpb.InspectUnitResponse{Verdict: unitVerdict(v)}, nil
}

// inspectionService describes the service as generated, but takes InspectUnit's frames
// from where they came.
func inspectionService() *grpc.ServiceDesc {
	d := inspectpb.InspectionService_ServiceDesc
	d.Methods = append([]grpc.MethodDesc{}, d.Methods...)
	for i := range d.Methods {
		if d.Methods[i].MethodName == "InspectUnit" {
			d.Methods[i].Handler = inspectIncoming
		}
	}
	return &d
}

// inspectIncoming is the generated handler of InspectUnit but for the type it decodes into.
func inspectIncoming(srv any, ctx context.Context, decode func(any) error, intercept grpc.UnaryServerInterceptor) (any, error) {
	in := &inspectpb.IncomingUnit{}
	if err := decode(in); err != nil {
		return nil, err
	}
	defer in.Free()
	handle := func(ctx context.Context, req any) (any, error) {
		return srv.(*Inspection).inspectUnit(ctx, req.(*inspectpb.IncomingUnit))
	}
	if intercept == nil {
		return handle(ctx, in)
	}
	info := &grpc.UnaryServerInfo{Server: srv, FullMethod: inspectpb.InspectionService_InspectUnit_FullMethodName}
	return intercept(ctx, in, info, handle)
}
