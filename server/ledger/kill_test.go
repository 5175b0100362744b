package ledger

import (
	"bufio"
	"context"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"lapgate/pipeline"
)

// writerVariable names the ledger that this test binary writes to, until it is killed,
// when it is started again as a writer.
const writerVariable = "LEDGER_TEST_WRITER"

// writeUntilKilled records units and prints the id of each once it is acknowledged.
func writeUntilKilled(path string) int {
	ctx := context.Background()
	s, err := Open(ctx, path)
	if err != nil {
		fmt.Println("error", err)
		return 1
	}
	for {
		unit, err := s.NextUnitID(ctx, "disc-25")
		if err == nil {
			_, _, err = s.Record(ctx, disc(unit, 1, pipeline.Reject, noon, "dig size"))
		}
		if err != nil {
			fmt.Println("error", err)
			return 1
		}
		fmt.Println("unit", unit)
	}
}

func TestKilledWhileWritingLosesNothingAcknowledged(t *testing.T) {
	path := filepath.Join(t.TempDir(), "ledger.db")
	acknowledged := map[string]bool{}
	for range 6 {
		for _, unit := range runAndKill(t, path) {
			if acknowledged[unit] {
				t.Errorf("unit id %s was given twice", unit)
			}
			acknowledged[unit] = true
		}
	}
	if len(acknowledged) < 6*5 {
		t.Fatalf("only %d records were acknowledged: the test shows nothing", len(acknowledged))
	}
	s := openAt(t, path)
	checkWhole(t, s)
	for unit := range acknowledged {
		story, err := s.Unit(context.Background(), "disc-25", unit)
		if err != nil || len(story) != 1 || len(story[0].Judgements) != 1 || len(story[0].Evidence.Defects) != 2 {
			t.Errorf("unit %s: %d showings, %v", unit, len(story), err)
		}
	}
	c, err := s.Counts(context.Background(), Question{})
	if n := rowsIn(t, s, "inspections"); err != nil || c[0].Showings.Reject != int64(n) || n > len(acknowledged)+6 {
		t.Errorf("%d rows, %d acknowledged, counts %+v, %v", n, len(acknowledged), c, err)
	}
}

// runAndKill starts a writer, kills it at a random moment and returns what it acknowledged.
func runAndKill(t *testing.T, path string) []string {
	t.Helper()
	cmd := exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), writerVariable+"="+path)
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	var units []string
	enough := 5 + rand.IntN(20)
	for lines := bufio.NewScanner(out); lines.Scan(); {
		word, rest, _ := strings.Cut(lines.Text(), " ")
		if word != "unit" {
			t.Errorf("writer: %s", lines.Text())
			break
		}
		units = append(units, rest)
		if len(units) == enough { // and somewhere within the next few records
			time.AfterFunc(time.Duration(rand.IntN(10_000))*time.Microsecond, func() { _ = cmd.Process.Kill() })
		}
	}
	_ = cmd.Wait() // killed
	return units
}

// checkWhole runs SQLite's own checks and looks for half-written records.
func checkWhole(t *testing.T, s *Store) {
	t.Helper()
	for _, pragma := range []string{"PRAGMA integrity_check", "PRAGMA foreign_key_check"} {
		rows, err := s.writer.Query(pragma)
		if err != nil {
			t.Fatal(err)
		}
		for rows.Next() {
			columns, _ := rows.Columns()
			values := make([]any, len(columns))
			for i := range values {
				values[i] = new(any)
			}
			if err := rows.Scan(values...); err != nil {
				t.Fatal(err)
			}
			if got := fmt.Sprint(*values[0].(*any)); got != "ok" {
				t.Errorf("%s: %s", pragma, got)
			}
		}
		rows.Close()
	}
	n := rowsIn(t, s, "inspections")
	for _, table := range []string{"views", "evidence", "judgements"} {
		if m := rowsIn(t, s, table); m != n {
			t.Errorf("%s: %d rows for %d inspections", table, m, n)
		}
	}
}
