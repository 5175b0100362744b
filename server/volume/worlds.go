package volume

import (
	"context"
	"math/rand/v2"
	"runtime"
	"sync"
	"sync/atomic"

	"lapgate/server/volume/plan"
)

// draw makes the plan's worlds. Every belief has its own random stream, so a
// new one does not disturb the others, and all combinations meet the same
// worlds (common random numbers).
func draw(k *plan.Knowledge, seed uint64, draws int) []plan.World {
	values := make([][]float64, draws)
	for d := range values {
		values[d] = make([]float64, len(k.Beliefs))
	}
	for i, belief := range k.Beliefs {
		src := rand.NewPCG(seed, uint64(i))
		for d := range values {
			values[d][i] = belief.Draw(src)
		}
	}
	worlds := make([]plan.World, draws)
	for d := range worlds {
		worlds[d] = k.World(values[d])
	}
	return worlds
}

// each calls work for 0..n-1 on all processors and stops early when ctx ends.
func each(ctx context.Context, n int, work func(i int)) error {
	var next atomic.Int64
	var group sync.WaitGroup
	for range min(n, runtime.GOMAXPROCS(0)) {
		group.Add(1)
		go func() {
			defer group.Done()
			for i := int(next.Add(1)) - 1; i < n && ctx.Err() == nil; i = int(next.Add(1)) - 1 {
				work(i)
			}
		}()
	}
	group.Wait()
	return ctx.Err()
}

// quantiles puts the two order statistics of v at their places by partial
// sorting and returns them; v is reordered.
func quantiles(v []float64, low, high float64) (atLow, atHigh float64) {
	i, j := int(low*float64(len(v)-1)+0.5), int(high*float64(len(v)-1)+0.5)
	selectNth(v, i)
	atLow = v[i]
	rest := v[i:]
	selectNth(rest, j-i)
	return atLow, rest[j-i]
}

// selectNth is Hoare's quickselect with the middle as pivot.
func selectNth(v []float64, n int) {
	low, high := 0, len(v)-1
	for low < high {
		pivot := v[low+(high-low)/2]
		i, j := low, high
		for i <= j {
			for v[i] < pivot {
				i++
			}
			for v[j] > pivot {
				j--
			}
			if i <= j {
				v[i], v[j] = v[j], v[i]
				i, j = i+1, j-1
			}
		}
		switch {
		case n <= j:
			high = j
		case n >= i:
			low = i
		default:
			return
		}
	}
}
