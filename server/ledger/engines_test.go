package ledger

import (
	"context"
	"database/sql"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

func TestMain(m *testing.M) {
	if path := os.Getenv(writerVariable); path != "" {
		os.Exit(writeUntilKilled(path))
	}
	code := m.Run()
	server.stop()
	os.Exit(code)
}

// onEach runs a test on an empty ledger of every engine there is.
func onEach(t *testing.T, test func(*testing.T, *Store)) {
	t.Run("sqlite", func(t *testing.T) { test(t, openAt(t, filepath.Join(t.TempDir(), "ledger.db"))) })
	t.Run("postgresql", func(t *testing.T) { test(t, openAt(t, server.database(t))) })
}

func openAt(t testing.TB, dsn string) *Store {
	t.Helper()
	s, err := Open(context.Background(), dsn)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	})
	return s
}

// postgres is a PostgreSQL server that the tests start for themselves, on a unix socket.
type postgres struct {
	once sync.Once
	why  string // not started
	dir  string
	proc *exec.Cmd
	n    int
}

var server postgres

// database makes an empty schema, which serves as a database of its own, and returns its
// address.
func (p *postgres) database(t testing.TB) string {
	t.Helper()
	p.once.Do(func() {
		if err := p.start(); err != nil {
			p.why = err.Error()
		}
	})
	if p.dir == "" {
		t.Skip("no PostgreSQL to test on: " + p.why)
	}
	if p.why != "" {
		t.Fatal("PostgreSQL did not start: " + p.why)
	}
	p.n++
	name := fmt.Sprintf("ledger%d", p.n)
	db, err := sql.Open("pgx", p.dsn("public"))
	if err != nil {
		t.Fatal(err)
	}
	defer db.Close()
	if _, err := db.Exec("CREATE SCHEMA " + name); err != nil {
		t.Fatal(err)
	}
	return p.dsn(name)
}

func (p *postgres) dsn(schema string) string {
	return fmt.Sprintf("postgres:///postgres?host=%s&user=ledger&sslmode=disable&search_path=%s", p.dir, schema)
}

func (p *postgres) start() error {
	initdb, err := exec.LookPath("initdb")
	if err != nil {
		return fmt.Errorf("initdb is not on the path; install PostgreSQL to run these tests")
	}
	if initdb, err = filepath.EvalSymlinks(initdb); err != nil {
		return err
	}
	// The path of a unix socket must be short.
	if p.dir, err = os.MkdirTemp("", "pg"); err != nil {
		return err
	}
	data := filepath.Join(p.dir, "data")
	attributes := &syscall.SysProcAttr{Pdeathsig: syscall.SIGINT}
	if os.Geteuid() == 0 { // PostgreSQL refuses root; 65534 is nobody by common practice
		if err := os.Chown(p.dir, 65534, 65534); err != nil {
			return err
		}
		attributes.Credential = &syscall.Credential{Uid: 65534, Gid: 65534}
	}
	cmd := exec.Command(initdb, "-D", data, "-U", "ledger", "-A", "trust", "-E", "UTF8", "--locale=C", "-N")
	cmd.SysProcAttr, cmd.Dir = attributes, p.dir
	if out, err := cmd.CombinedOutput(); err != nil {
		return fmt.Errorf("initdb: %w: %s", err, out)
	}
	p.proc = exec.Command(filepath.Join(filepath.Dir(initdb), "postgres"), "-D", data, "-k", p.dir,
		"-c", "listen_addresses=", "-c", "max_connections=100", "-c", "fsync=off") // durability is not tested here
	p.proc.SysProcAttr, p.proc.Dir = attributes, p.dir
	if err := p.proc.Start(); err != nil {
		return err
	}
	return p.await()
}

func (p *postgres) await() error {
	db, err := sql.Open("pgx", p.dsn("public"))
	if err != nil {
		return err
	}
	defer db.Close()
	for range 200 {
		if err = db.Ping(); err == nil {
			return nil
		}
		time.Sleep(50 * time.Millisecond)
	}
	return err
}

func (p *postgres) stop() {
	if p.proc != nil && p.proc.Process != nil {
		_ = p.proc.Process.Signal(syscall.SIGQUIT) // at once: nothing is kept
		_ = p.proc.Wait()
	}
	if strings.HasPrefix(filepath.Base(p.dir), "pg") {
		_ = os.RemoveAll(p.dir)
	}
}
