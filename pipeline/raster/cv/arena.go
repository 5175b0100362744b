//go:build gocv_specific_modules

package cv

import (
	"fmt"
	"runtime"

	"gocv.io/x/gocv"
)

// arena owns Mats and closes them in reverse order: a Mat that nobody closes is lost for good.
type arena struct {
	mats   []*gocv.Mat
	pinner runtime.Pinner
}

func (a *arena) add(m gocv.Mat) *gocv.Mat {
	a.mats = append(a.mats, &m)
	return &m
}

func (a *arena) empty() *gocv.Mat { return a.add(gocv.NewMat()) }

func (a *arena) sized(rows, cols int, t gocv.MatType) *gocv.Mat {
	return a.add(gocv.NewMatWithSize(rows, cols, t))
}

// fromBytes wraps data without copying it; data must not change until close.
func (a *arena) fromBytes(rows, cols int, t gocv.MatType, data []byte) (*gocv.Mat, error) {
	if len(data) == 0 {
		return nil, fmt.Errorf("no pixels for a Mat of %d × %d", cols, rows)
	}
	a.pinner.Pin(&data[0])
	m, err := gocv.NewMatFromBytes(rows, cols, t, data)
	if err != nil {
		return nil, err
	}
	return a.add(m), nil
}

// close closes every Mat; it may be called again.
func (a *arena) close() {
	for i := len(a.mats) - 1; i >= 0; i-- {
		_ = a.mats[i].Close()
	}
	a.mats = nil
	a.pinner.Unpin()
}
