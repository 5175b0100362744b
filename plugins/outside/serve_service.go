package outside

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"sync"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"lapgate/pipeline"
	"lapgate/proto/stagepb"
)

// service answers the contract's calls for one factory. A panic in a stage is not
// caught: the process ends, and its host says so and starts another.
type service struct {
	stagepb.UnimplementedStageServiceServer
	factory  pipeline.Factory
	describe *stagepb.DescribeResponse
	memory   mappings
	stderr   *os.File // as it was before the launcher took it
	own      sync.Once

	mu   sync.Mutex // guards what follows
	open map[uint64]opened
	last uint64
}

// opened is a stage that was built.
type opened struct {
	stage       pipeline.Stage
	calibration *pipeline.Calibration
}

func newService(f pipeline.Factory) (*service, error) {
	d, err := describe(f)
	return &service{factory: f, describe: d, open: map[uint64]opened{}, stderr: os.Stderr}, err
}

// Describe implements the contract. It is the first call: from here on what the stage
// prints goes straight to its log, so that the last words before a crash are not lost in
// a buffer.
func (s *service) Describe(context.Context, *stagepb.DescribeRequest) (*stagepb.DescribeResponse, error) {
	s.own.Do(func() { os.Stdout, os.Stderr = s.stderr, s.stderr })
	return s.describe, nil
}

// CheckSettings implements the contract.
func (s *service) CheckSettings(_ context.Context, req *stagepb.CheckSettingsRequest) (*stagepb.CheckSettingsResponse, error) {
	settings, problems := checkSettings(s.factory, req.GetSettingsJson())
	if len(problems) > 0 {
		return &stagepb.CheckSettingsResponse{Problems: problems}, nil
	}
	return &stagepb.CheckSettingsResponse{EffectiveSettingsJson: settings}, nil
}

// Open implements the contract. Planes of the calibration are copied, the memory they
// came in is the host's.
func (s *service) Open(_ context.Context, req *stagepb.OpenRequest) (*stagepb.OpenResponse, error) {
	cal, err := stagepb.ToCalibration(req.GetCalibration(), s.memory.fetchCopy)
	if err != nil {
		return nil, status.Error(codes.InvalidArgument, err.Error())
	}
	others, err := stagepb.ToCalibrations(req.GetCalibrations(), s.memory.fetchCopy)
	if err != nil {
		return nil, status.Error(codes.InvalidArgument, err.Error())
	}
	var wanted string
	env := pipeline.Environment{View: req.GetView(), Calibration: cal, Calibrations: others, Geometry: stagepb.ToGeometry(req.GetGeometry()), ReadFile: readSent(req.GetFiles(), &wanted)}
	stage, settings, err := s.factory.New(decodeText(req.GetSettingsJson()), env)
	if err != nil && wanted != "" {
		return &stagepb.OpenResponse{WantedFile: wanted}, nil
	}
	if err != nil {
		return nil, wireError(err)
	}
	text, err := settingsText(settings)
	if err != nil {
		return nil, wireError(err)
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.last++
	s.open[s.last] = opened{stage, cal}
	return &stagepb.OpenResponse{Handle: s.last, EffectiveSettingsJson: text}, nil
}

// readSent reads files that the host has sent and notes the first that is missing.
func readSent(files map[string][]byte, wanted *string) func(string) ([]byte, error) {
	return func(name string) ([]byte, error) {
		if b, ok := files[name]; ok {
			return b, nil
		}
		if *wanted == "" {
			*wanted = name
		}
		return nil, fmt.Errorf("%s: %w", name, fs.ErrNotExist)
	}
}

// Run implements the contract.
func (s *service) Run(ctx context.Context, req *stagepb.RunRequest) (*stagepb.RunResponse, error) {
	s.mu.Lock()
	o, ok := s.open[req.GetHandle()]
	s.mu.Unlock()
	if !ok {
		return nil, status.Errorf(codes.NotFound, "no open stage %d", req.GetHandle())
	}
	item, err := stagepb.ToItem(req.GetItem(), s.memory.fetch)
	if err != nil {
		return nil, status.Error(codes.InvalidArgument, err.Error())
	}
	item.Calibration = o.calibration
	was := item.Fork()
	if err := o.stage.Run(ctx, item); err != nil {
		return nil, wireError(err)
	}
	return answer(was, item, s.memory.packer(req.GetOutput()))
}

// Close implements the contract. Closing twice is no error.
func (s *service) Close(_ context.Context, req *stagepb.CloseRequest) (*stagepb.CloseResponse, error) {
	s.mu.Lock()
	o, ok := s.open[req.GetHandle()]
	delete(s.open, req.GetHandle())
	s.mu.Unlock()
	if c, closes := o.stage.(io.Closer); ok && closes {
		if err := c.Close(); err != nil {
			return nil, wireError(err)
		}
	}
	return &stagepb.CloseResponse{}, nil
}

// wireError keeps the one distinction that matters to the host: whose fault it was.
func wireError(err error) error {
	switch {
	case errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded):
		return status.FromContextError(err).Err()
	case pipeline.KindOf(err) == pipeline.InvalidKind:
		return status.Error(codes.InvalidArgument, err.Error())
	}
	return status.Error(codes.FailedPrecondition, err.Error())
}
