package inspectpb

import (
	"context"
	"errors"
	"fmt"
	"testing"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
)

type busy struct{ error }

func (busy) RetryAfter() time.Duration { return 250 * time.Millisecond }

func TestErrorsKeepTheirKindOverTheWire(t *testing.T) {
	for _, c := range []struct {
		err  error
		code codes.Code
	}{
		{pipeline.Invalid("count: got 0, want 1"), codes.InvalidArgument},
		{fmt.Errorf("frame 3: %w", pipeline.Fail(pipeline.Conflict, "identity conflict")), codes.AlreadyExists},
		{pipeline.Fail(pipeline.Exhausted, "no room"), codes.ResourceExhausted},
		{pipeline.NotFound("no unit"), codes.NotFound},
		{pipeline.Fail(pipeline.Unready, "no recipe"), codes.FailedPrecondition},
		{&pipeline.Error{Kind: pipeline.Unready, Err: busy{errors.New("starting")}}, codes.Unavailable},
		{errors.New("broken"), codes.Internal},
	} {
		got := ToStatus(c.err)
		if status.Code(got) != c.code {
			t.Errorf("%v: code %v, want %v", c.err, status.Code(got), c.code)
		}
		back := ToError(got)
		if pipeline.KindOf(back) != pipeline.KindOf(c.err) || back.Error() != c.err.Error() {
			t.Errorf("%v came back as %v (kind %d)", c.err, back, pipeline.KindOf(back))
		}
	}
}

func TestStatusDetails(t *testing.T) {
	details := FromError(pipeline.Invalid("count: got 0, want 1")).Details()
	if len(details) != 1 {
		t.Fatalf("got %d details, want one BadRequest", len(details))
	}
	v := details[0].(*errdetails.BadRequest).GetFieldViolations()[0]
	if v.GetField() != "count" || v.GetDescription() != "got 0, want 1" {
		t.Errorf("got field %q, description %q", v.GetField(), v.GetDescription())
	}
	if d := FromError(pipeline.Invalid(`view "ring" has no frame`)).Details(); len(d) != 0 {
		t.Errorf("a message without a field got %v", d)
	}
	if d, ok := RetryDelay(ToStatus(pipeline.Fail(pipeline.Exhausted, "no room"))); !ok || d != DefaultRetryAfter {
		t.Errorf("retry delay %v, %v; want %v", d, ok, DefaultRetryAfter)
	}
}

func TestStatusAndContextErrorsStay(t *testing.T) {
	if FromError(nil) != nil || ToStatus(nil) != nil || ToError(nil) != nil {
		t.Error("nil is no error")
	}
	if c := FromError(status.Error(codes.DataLoss, "x")).Code(); c != codes.DataLoss {
		t.Errorf("got %v, want DataLoss", c)
	}
	if c := FromError(fmt.Errorf("ask: %w", context.DeadlineExceeded)).Code(); c != codes.DeadlineExceeded {
		t.Errorf("got %v, want DeadlineExceeded", c)
	}
}

func TestRefuse(t *testing.T) {
	h := &FrameHeader{RequestId: "r1", Identity: &Identity{Unit: "U1"}}
	got := Refuse(7, h, &pipeline.Error{Kind: pipeline.Exhausted, Err: busy{errors.New("no room")}})
	if got.Frame != 7 || got.RequestId != "r1" || got.Identity.Unit != "U1" || got.Code != int32(codes.ResourceExhausted) ||
		got.Message != "no room" || got.RetryAfterMs != 250 {
		t.Errorf("got %v", got)
	}
	if Refuse(1, nil, errors.New("x")).Code != int32(codes.Internal) {
		t.Error("a frame without a header is refused all the same")
	}
}
