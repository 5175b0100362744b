//go:build !linux

package outside

import (
	"fmt"

	"lapgate/proto/stagepb"
)

// mappings is empty where memory is not shared: pixels travel in messages.
type mappings struct{}

func (m *mappings) fetch(p *stagepb.Pixels) ([]byte, error) {
	if p.GetShared() != nil {
		return nil, fmt.Errorf("shared memory is not supported on this system")
	}
	return stagepb.FromMessage(p)
}

func (m *mappings) packer(*stagepb.SharedBytes) stagepb.Pack { return stagepb.InMessage }
