package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"sync"
	"time"

	"github.com/spf13/pflag"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/plugins/builtin"
	"lapgate/plugins/outside"
	"lapgate/server"
)

// stageSet is the stages that this program knows: those compiled in, and those of a list
// of plug-ins, each in a process of its own. It is safe for concurrent use.
type stageSet struct {
	hosts []*outside.Host
	paths []string // of their programs

	mu        sync.Mutex // guards what follows
	revision  int
	catalogue *pipeline.Catalogue
}

// openHow is outside.Open, or outside.OpenLater for a program that goes on without a stage
// that does not start.
type openHow func(context.Context, outside.Settings, *slog.Logger) (*outside.Host, error)

// openStages starts the plug-ins that a file lists (none where it is empty). changed is
// told of every change of a plug-in's state; it may be nil.
func openStages(ctx context.Context, pluginsFile string, log *slog.Logger, open openHow, changed func(outside.Status)) (*stageSet, error) {
	list, err := configs.LoadPlugins(pluginsFile)
	if err != nil {
		return nil, err
	}
	s := &stageSet{}
	for _, p := range list {
		h, err := open(ctx, hostSettings(p, changed), log)
		if err != nil {
			return nil, errors.Join(err, s.close())
		}
		s.hosts, s.paths = append(s.hosts, h), append(s.paths, p.Path)
		if st := h.Status(); st.State == outside.Down {
			log.Error("stage outside does not start; units that need it are held, and it is tried again", "stage", st.Type, "path", p.Path, "why", st.LastError)
		} else {
			log.Info("stage outside is up", "stage", st.Type, "version", h.Factory().Version, "path", p.Path, "bound_by", st.Isolation)
		}
	}
	if err := s.renew(); err != nil {
		return nil, errors.Join(fmt.Errorf("%s: %w; give one of them another type", pluginsFile, err), s.close())
	}
	return s, nil
}

// renew makes the catalogue of what the stages say they are now.
func (s *stageSet) renew() error {
	var factories []pipeline.Factory
	for _, h := range s.hosts {
		factories = append(factories, h.Factory())
	}
	cat, err := builtin.Catalogue(factories...)
	if err == nil {
		s.catalogue = cat
	}
	return err
}

// now returns the catalogue, and a number that changes when a stage has told something new
// of itself: at its first start, or after its program was mended.
func (s *stageSet) now() (*pipeline.Catalogue, int) {
	s.mu.Lock()
	defer s.mu.Unlock()
	n := 0
	for _, h := range s.hosts {
		n += h.Revision()
	}
	if n != s.revision && s.renew() == nil {
		s.revision = n
	}
	return s.catalogue, s.revision
}

// current returns the catalogue.
func (s *stageSet) current() *pipeline.Catalogue {
	cat, _ := s.now()
	return cat
}

// host returns the host of a stage type and the path of its program; nil where it runs
// inside.
func (s *stageSet) host(typ string) (*outside.Host, string) {
	for i, h := range s.hosts {
		if h.Status().Type == typ {
			return h, s.paths[i]
		}
	}
	return nil, ""
}

// states returns how the plug-ins are.
func (s *stageSet) states() []server.OutsideStage {
	var out []server.OutsideStage
	for _, h := range s.hosts {
		st := h.Status()
		out = append(out, server.OutsideStage{Type: st.Type, State: string(st.State), Cause: st.LastError, Restarts: st.Restarts, Since: st.Since})
	}
	return out
}

// unchecked says of each stage of a recipe whose settings nobody could check why not.
func (s *stageSet) unchecked(r *pipeline.Recipe) []string {
	var out []string
	say := func(list []pipeline.StageSpec) {
		for _, spec := range list {
			h, _ := s.host(spec.Type)
			if h != nil && h.Status().State != outside.Up {
				out = append(out, fmt.Sprintf("%s: the settings of stage %s are not checked: it is %s: %s", spec.Where, spec.Type, h.Status().State, h.Status().LastError))
			}
		}
	}
	for _, v := range r.Views {
		say(v.Stages)
	}
	say(r.Unit)
	return out
}

// hostSettings lays what a list says over the defaults.
func hostSettings(p configs.Plugin, changed func(outside.Status)) outside.Settings {
	s := outside.DefaultSettings()
	s.Name, s.Path, s.Args, s.Env, s.BytesOnly, s.Changed = p.Name, p.Path, p.Args, p.Env, p.Pixels == "bytes", changed
	for _, d := range []struct {
		to    *time.Duration
		value int
		unit  time.Duration
	}{{&s.Deadline, p.DeadlineMS, time.Millisecond}, {&s.RestartWindow, p.RestartWindowS, time.Second}, {&s.CoolDown, p.CoolDownS, time.Second},
		{&s.Backoff, p.BackoffMS, time.Millisecond}, {&s.StartTimeout, p.StartTimeoutMS, time.Millisecond}} {
		if d.value > 0 {
			*d.to = time.Duration(d.value) * d.unit
		}
	}
	if p.MaxConcurrent > 0 {
		s.MaxConcurrent = p.MaxConcurrent
	}
	if p.MaxRSSMB > 0 {
		s.MaxRSSBytes = int64(p.MaxRSSMB) << 20
	}
	if p.SlotMB > 0 {
		s.SlotBytes = int64(p.SlotMB) << 20
	}
	if p.RestartBudget != nil {
		s.RestartBudget = *p.RestartBudget
	}
	if p.MinRegionShare > 0 {
		s.MinRegionShare = p.MinRegionShare
	}
	return s
}

// close ends the plug-ins.
func (s *stageSet) close() error {
	if s == nil {
		return nil
	}
	var errs []error
	for _, h := range s.hosts {
		errs = append(errs, h.Close())
	}
	return errors.Join(errs...)
}

// pluginsFlag declares --plugins of a verb that needs the stages.
func pluginsFlag(flags *pflag.FlagSet, file *string) {
	flags.StringVar(file, "plugins", "", "file that lists the stages in processes of their own; empty = none")
}
