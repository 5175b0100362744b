package main

import (
	"bufio"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"time"
)

// script is a running compare.py.
type script struct {
	cmd      *exec.Cmd
	dir      string
	in       io.WriteCloser
	out      *bufio.Reader
	versions string
}

func startScript(path string, sc scene) (*script, error) {
	dir, err := os.MkdirTemp("", "lapgate-compare-")
	if err != nil {
		return nil, err
	}
	s := &script{dir: dir, cmd: exec.Command("/usr/bin/python3", path, dir)}
	s.cmd.Stderr = os.Stderr
	if err := sc.write(dir); err != nil {
		return nil, err
	}
	if s.in, err = s.cmd.StdinPipe(); err != nil {
		return nil, err
	}
	out, err := s.cmd.StdoutPipe()
	if err != nil {
		return nil, err
	}
	s.out = bufio.NewReader(out)
	if err := s.cmd.Start(); err != nil {
		return nil, err
	}
	var v struct{ OpenCV, SEP, Numpy string }
	if err := s.answer(&v); err != nil {
		s.stop()
		return nil, err
	}
	s.versions = fmt.Sprintf("OpenCV %s, SEP %s, numpy %s", v.OpenCV, v.SEP, v.Numpy)
	return s, nil
}

// methods are those of the script.
func (s *script) methods() []method {
	var out []method
	for _, m := range []struct {
		word, name string
		threads    int
	}{{"plain1", pythonPlain, 1}, {"plain2", "Python and OpenCV, plain, 2 threads", 2}, {"tuned1", "Python and OpenCV, tuned, 1 thread", 1},
		{"tuned2", pythonTuned, 2}, {"sep", sepName, 1}} {
		out = append(out, method{m.name, m.threads, func() (pair, []centre, error) { return s.run(m.word) }})
	}
	return out
}

func (s *script) run(name string) (pair, []centre, error) {
	if _, err := fmt.Fprintln(s.in, name); err != nil {
		return pair{}, nil, err
	}
	var a struct {
		ClockMS float64 `json:"clock_ms"`
		CPUMS   float64 `json:"cpu_ms"`
		Centres []centre
	}
	err := s.answer(&a)
	ms := func(v float64) time.Duration { return time.Duration(v * float64(time.Millisecond)) }
	return pair{ms(a.ClockMS), ms(a.CPUMS)}, a.Centres, err
}

func (s *script) answer(into any) error {
	line, err := s.out.ReadBytes('\n')
	if err != nil {
		return fmt.Errorf("no answer (%w); it needs Debian's python3-opencv, python3-sep and python3-numpy", err)
	}
	return json.Unmarshal(line, into)
}

func (s *script) stop() {
	s.in.Close()
	_ = s.cmd.Wait()
	_ = os.RemoveAll(s.dir)
}

// write writes the scene as compare.py reads it.
func (s scene) write(dir string) error {
	bad := make([]byte, len(s.bad.Bits))
	for i, is := range s.bad.Bits {
		if is {
			bad[i] = 1
		}
	}
	text, err := json.Marshal(map[string]float64{"width": float64(s.raw.Width), "height": float64(s.raw.Height), "k_low": 3.5, "k_high": 6})
	if err != nil {
		return err
	}
	dark, _ := binary.Append(nil, binary.LittleEndian, s.dark.Pix) // float32 has a fixed size
	gain, _ := binary.Append(nil, binary.LittleEndian, s.gain.Pix)
	for name, data := range map[string][]byte{"frame.json": text, "raw.u8": s.raw.Data, "dark.f32": dark, "gain.f32": gain, "bad.u8": bad} {
		if err := os.WriteFile(filepath.Join(dir, name), data, 0o644); err != nil {
			return err
		}
	}
	return nil
}
