package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"time"

	"github.com/spf13/pflag"

	"lapgate/configs"
	"lapgate/pipeline"
	"lapgate/plugins/builtin"
	"lapgate/plugins/outside"
)

// stageSet is the stages that this program knows: those compiled in, and those of a list
// of plug-ins, each in a process of its own.
type stageSet struct {
	catalogue *pipeline.Catalogue
	hosts     []*outside.Host
	paths     map[string]string // of plug-ins, by stage type
}

// openStages starts the plug-ins that a file lists (none where it is empty). changed is
// told of every change of a plug-in's state; it may be nil.
func openStages(ctx context.Context, pluginsFile string, log *slog.Logger, changed func(outside.Status)) (*stageSet, error) {
	list, err := configs.LoadPlugins(pluginsFile)
	if err != nil {
		return nil, err
	}
	s := &stageSet{paths: map[string]string{}}
	var factories []pipeline.Factory
	for _, p := range list {
		h, err := outside.Open(ctx, hostSettings(p, changed), log)
		if err != nil {
			return nil, errors.Join(err, s.close())
		}
		s.hosts = append(s.hosts, h)
		f := h.Factory()
		factories = append(factories, f)
		s.paths[f.Type] = p.Path
		log.Info("stage outside is up", "stage", f.Type, "version", f.Version, "path", p.Path, "bound_by", h.Status().Isolation)
	}
	if s.catalogue, err = builtin.Catalogue(factories...); err != nil {
		return nil, errors.Join(fmt.Errorf("%s: %w; give one of them another type", pluginsFile, err), s.close())
	}
	return s, nil
}

// hostSettings lays what a list says over the defaults.
func hostSettings(p configs.Plugin, changed func(outside.Status)) outside.Settings {
	s := outside.DefaultSettings()
	s.Name, s.Path, s.Args, s.Env, s.BytesOnly, s.Changed = p.Name, p.Path, p.Args, p.Env, p.Pixels == "bytes", changed
	for _, d := range []struct {
		to    *time.Duration
		value int
		unit  time.Duration
	}{{&s.Deadline, p.DeadlineMS, time.Millisecond}, {&s.RestartWindow, p.RestartWindowS, time.Second},
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
