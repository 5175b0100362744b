package inspectpb

import (
	"context"
	"errors"
	"regexp"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/protoadapt"
	"google.golang.org/protobuf/types/known/durationpb"

	"lapgate/pipeline"
)

// DefaultRetryAfter is told to a sender where the error itself does not say when to
// try again.
const DefaultRetryAfter = time.Second

// RetryLater is an error that knows when to try again.
type RetryLater interface {
	error
	RetryAfter() time.Duration
}

// codeTable pairs kinds and codes. FromError takes the first row of a kind, ToError
// the row of a code.
func codeTable() []enum[pipeline.ErrorKind, codes.Code] {
	return []enum[pipeline.ErrorKind, codes.Code]{
		{pipeline.InvalidKind, codes.InvalidArgument},
		{pipeline.Conflict, codes.AlreadyExists},
		{pipeline.Exhausted, codes.ResourceExhausted},
		{pipeline.NotFoundKind, codes.NotFound},
		{pipeline.Unready, codes.FailedPrecondition},
		{pipeline.Unready, codes.Unavailable},
		{pipeline.Internal, codes.Internal},
	}
}

// FromError returns the status that tells err to a caller: BadRequest details where
// an invalid argument names its field ("count: got 0, want 1"), RetryInfo where trying
// again helps. An error that is a status already, and a context's, stay what they are.
// Unready is FailedPrecondition, or Unavailable where the error says when to retry.
func FromError(err error) *status.Status {
	if err == nil {
		return nil
	}
	if s, ok := status.FromError(err); ok {
		return s
	}
	if errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return status.FromContextError(err)
	}
	var later RetryLater
	code := codeOf(err)
	if errors.As(err, &later) && code == codes.FailedPrecondition {
		code = codes.Unavailable
	}
	return withDetails(status.New(code, err.Error()), later)
}

// ToStatus is FromError as the error that a gRPC handler returns.
func ToStatus(err error) error { return FromError(err).Err() }

func codeOf(err error) codes.Code {
	for _, row := range codeTable() {
		if row.word == pipeline.KindOf(err) {
			return row.number
		}
	}
	return codes.Internal
}

var fieldPattern = regexp.MustCompile(`^([a-z][a-z0-9_.\[\]]*): (.+)`)

func withDetails(s *status.Status, later RetryLater) *status.Status {
	var detail protoadapt.MessageV1
	switch s.Code() {
	case codes.InvalidArgument:
		m := fieldPattern.FindStringSubmatch(s.Message())
		if m == nil {
			return s
		}
		detail = &errdetails.BadRequest{FieldViolations: []*errdetails.BadRequest_FieldViolation{{Field: m[1], Description: m[2]}}}
	case codes.ResourceExhausted, codes.Unavailable:
		after := DefaultRetryAfter
		if later != nil {
			after = later.RetryAfter()
		}
		detail = &errdetails.RetryInfo{RetryDelay: durationpb.New(after)}
	default:
		return s
	}
	if with, err := s.WithDetails(detail); err == nil {
		return with
	}
	return s
}

// ToError returns a called server's error as one with a kind; its text is the
// server's. Codes that stand for no kind are Internal.
func ToError(err error) error {
	if err == nil {
		return nil
	}
	s := status.Convert(err)
	return &pipeline.Error{Kind: KindOfCode(s.Code()), Err: errors.New(s.Message())}
}

// KindOfCode returns the kind that a code stands for, Internal where it stands for none.
func KindOfCode(c codes.Code) pipeline.ErrorKind {
	for _, row := range codeTable() {
		if row.number == c {
			return row.word
		}
	}
	return pipeline.Internal
}

// RetryDelay returns when a server's error asks the caller to try again.
func RetryDelay(err error) (time.Duration, bool) {
	for _, d := range status.Convert(err).Details() {
		if info, ok := d.(*errdetails.RetryInfo); ok {
			return info.GetRetryDelay().AsDuration(), true
		}
	}
	return 0, false
}

// Refuse returns the answer to a frame that was not taken because of err.
func Refuse(frame uint32, h *FrameHeader, err error) *FrameRefused {
	s := FromError(err)
	out := &FrameRefused{Frame: frame, RequestId: h.GetRequestId(), Identity: h.GetIdentity(), Code: int32(s.Code()), Message: s.Message()}
	if after, ok := RetryDelay(s.Err()); ok {
		out.RetryAfterMs = clamp32(int(after.Milliseconds()))
	}
	return out
}
