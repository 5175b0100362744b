package outside

import (
	"fmt"
	"path/filepath"
	"time"

	"lapgate/pipeline"
)

// Settings say how a stage outside is launched and watched.
type Settings struct {
	Name           string            // in messages
	Path           string            // of the program; absolute, or relative to the host's working folder
	Args           []string          // for it
	Env            map[string]string // beside PATH, HOME, LANG and TMPDIR, which are all it gets
	Deadline       time.Duration     // for one call; then the process is killed
	MaxConcurrent  int               // calls at once
	MaxRSSBytes    int64             // resident memory of the process and its children, shared frames apart; 0 = no bound
	RestartBudget  int               // restarts within RestartWindow; one more and the stage is down
	RestartWindow  time.Duration     //
	Backoff        time.Duration     // before the second restart in a row; doubles from there
	CoolDown       time.Duration     // after which a stage that is down is tried again
	StartTimeout   time.Duration     // from launch to handshake
	SlotBytes      int64             // shared memory for what one call reads, and as much for what it writes; taken as it is used
	BytesOnly      bool              // pixels travel in messages
	Frames         *Arena            // frames in it are not copied; nil = every frame is
	MinRegionShare float64           // of the frame, for a region where there was none before
	Changed        func(Status)      // told at every change of state; nil = nobody is

	noNamespace bool // for tests: as where none is allowed
}

// DefaultSettings returns what a stage gets that says nothing else.
func DefaultSettings() Settings {
	return Settings{Deadline: 5 * time.Second, MaxConcurrent: 2, MaxRSSBytes: 1 << 30, RestartBudget: 5, RestartWindow: 10 * time.Minute, CoolDown: 10 * time.Minute,
		Backoff: 100 * time.Millisecond, StartTimeout: 10 * time.Second, SlotBytes: 512 << 20, MinRegionShare: 0.01}
}

// maxBackoff is the longest wait before a restart.
const maxBackoff = 10 * time.Second

func (s *Settings) check() error {
	switch {
	case s.Name == "":
		return pipeline.Invalid("name: not given, want a word for messages")
	case s.Path == "":
		return pipeline.Invalid("path: not given, want the program of the stage")
	case s.Deadline <= 0:
		return pipeline.Invalid("deadline: got %v, want above 0", s.Deadline)
	case s.MaxConcurrent < 1 || s.MaxConcurrent > 64:
		return pipeline.Invalid("max_concurrent: got %d, want 1 to 64", s.MaxConcurrent)
	case s.RestartBudget < 0 || s.RestartWindow <= 0 || s.CoolDown <= 0 || s.Backoff < 0 || s.StartTimeout <= 0:
		return pipeline.Invalid("restart budget %d in %v, cool-down %v, back-off %v, start time-out %v: want none below 0, and times above 0", s.RestartBudget, s.RestartWindow, s.CoolDown, s.Backoff, s.StartTimeout)
	case s.SlotBytes < 1<<12 || s.SlotBytes > 1<<36:
		return pipeline.Invalid("slot: got %d bytes, want 4 KiB to 64 GiB", s.SlotBytes)
	case !(s.MinRegionShare > 0 && s.MinRegionShare <= 1):
		return pipeline.Invalid("min_region_share: got %g, want above 0, at most 1", s.MinRegionShare)
	}
	path, err := filepath.Abs(s.Path)
	if err != nil {
		return fmt.Errorf("path %s: %w", s.Path, err)
	}
	s.Path = path
	return nil
}
