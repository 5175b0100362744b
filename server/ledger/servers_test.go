package ledger

import (
	"context"
	"fmt"
	"sync"
	"testing"
	"time"

	"lapgate/pipeline"
)

// Three servers start on one empty PostgreSQL database at once and record the same units,
// first and second attempts of a unit on different servers, while each asks for counts.
func TestSeveralServersShareOneLedger(t *testing.T) {
	dsn := server.database(t)
	ctx := context.Background()
	stores := make([]*Store, 3)
	inParallel(t, len(stores), func(i int) (err error) {
		stores[i], err = Open(ctx, dsn)
		return err
	})
	for _, s := range stores {
		defer s.Close()
	}
	var mu sync.Mutex
	fresh := 0
	inParallel(t, len(stores), func(i int) error {
		for n := range 40 {
			unit, attempt := fmt.Sprint(n/2), 1+(n+i)%2
			_, isFresh, err := stores[i].Record(ctx, disc(unit, attempt, pipeline.Hold, noon.Add(time.Duration(attempt)*time.Hour), "coverage"))
			if err != nil {
				return err
			}
			mu.Lock()
			fresh += int(flag(isFresh))
			mu.Unlock()
			if _, err := stores[i].Counts(ctx, Question{}); err != nil {
				return err
			}
		}
		return nil
	})
	got, err := stores[0].Counts(ctx, Question{})
	if err != nil || fresh != 40 || len(got) != 1 {
		t.Fatalf("fresh %d, counts %+v, %v", fresh, got, err)
	}
	if c := got[0]; c.Showings.Hold != 40 || c.First.Hold != 20 || c.Final.Open != 20 || c.Attempts != 40 {
		t.Errorf("%+v", c)
	}
}

func inParallel(t *testing.T, n int, f func(int) error) {
	t.Helper()
	var wg sync.WaitGroup
	errs := make([]error, n)
	for i := range n {
		wg.Add(1)
		go func() {
			defer wg.Done()
			errs[i] = f(i)
		}()
	}
	wg.Wait()
	for _, err := range errs {
		if err != nil {
			t.Fatal(err)
		}
	}
}

// The server throws out every connection, as when it restarts: what was under way fails
// with a clear error or not at all, and a resend is recorded once.
func TestALostPostgreSQLConnection(t *testing.T) {
	s, other := openAt(t, server.database(t)), openAt(t, server.database(t))
	ctx := context.Background()
	for i := range 10 {
		_, err := other.writer.Exec(`SELECT pg_terminate_backend(pid) FROM pg_stat_activity WHERE pid <> pg_backend_pid() AND backend_type = 'client backend'`)
		if err != nil {
			t.Fatal(err)
		}
		in := disc(fmt.Sprint(i), 1, pipeline.Accept, noon)
		if _, _, err := s.Record(ctx, in); err != nil {
			wantKind(t, err, pipeline.Unready)
			if _, _, err := s.Record(ctx, in); err != nil {
				t.Fatal(err)
			}
		}
	}
	if n := rowsIn(t, s, "inspections"); n != 10 {
		t.Errorf("%d inspections, want 10", n)
	}
}
