package main

import (
	"context"
	"io"
	"log/slog"
	"os"
	"os/signal"
	"path/filepath"
	"syscall"

	"github.com/spf13/cobra"

	"lapgate/configs"
)

func (a *app) serveCommand() *cobra.Command {
	var file string
	cmd := &cobra.Command{
		Use:   "serve",
		Short: "Run the inspection server until it is interrupted",
		Args:  cobra.NoArgs,
		RunE:  func(cmd *cobra.Command, _ []string) error { return a.serve(cmd, file) },
	}
	cmd.Flags().StringVar(&file, "config", "", "settings file; empty = defaults, environment and flags alone")
	configs.ServerFlags(cmd.Flags())
	return cmd
}

func (a *app) serve(cmd *cobra.Command, file string) error {
	settings, err := configs.LoadServer(file, cmd.Flags())
	if err != nil {
		return err
	}
	level := new(slog.LevelVar)
	setLevel(level, settings)
	log := newLog(a.err, level, settings.LogFormat)
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	s, err := startServing(ctx, settings, log)
	if err != nil {
		return err
	}
	if file != "" {
		if err := watchSettings(ctx, file, cmd, settings, level, s, log); err != nil {
			log.Warn("settings are not watched", "error", err)
		}
	}
	log.Info("serving", "listen", s.address(), "version", programVersion())
	<-ctx.Done()
	stop() // a second interrupt ends the program at once
	log.Info("stopping", "grace_ms", settings.ShutdownGraceMS)
	return s.stop()
}

func newLog(w io.Writer, level *slog.LevelVar, format string) *slog.Logger {
	if format == "text" {
		return slog.New(slog.NewTextHandler(w, &slog.HandlerOptions{Level: level}))
	}
	return slog.New(slog.NewJSONHandler(w, &slog.HandlerOptions{Level: level}))
}

func setLevel(level *slog.LevelVar, s configs.Server) {
	_ = level.UnmarshalText([]byte(s.LogLevel)) // checked by the reader
}

// watchSettings takes over what can change while the server runs: the log level, bytes
// in flight and the view time-out. The rest waits for the next start, and the log says so.
func watchSettings(ctx context.Context, file string, cmd *cobra.Command, first configs.Server, level *slog.LevelVar, s *serving, log *slog.Logger) error {
	name := filepath.Base(file)
	inForce := first
	_, err := configs.Watch(ctx, configs.WatchOptions[configs.Server]{
		Folder: filepath.Dir(file),
		Match:  func(n string) bool { return n == name },
		Parse:  func(path string, _ []byte) (configs.Server, error) { return configs.LoadServer(path, cmd.Flags()) },
		Changed: func(path string, now configs.Server) {
			if now == inForce {
				return
			}
			setLevel(level, now)
			s.intake.Adjust(now.MaxBytesInFlight, viewTimeout(now))
			log.Info("settings reloaded", "file", path, "waits_for_next_start", waiting(inForce, now))
			inForce = now
		},
		Failed: func(path string, err error) {
			log.Error("settings refused; the last good ones stay", "file", path, "error", err)
		},
	})
	return err
}

// waiting lists the settings that differ and cannot change while the server runs.
func waiting(old, now configs.Server) []string {
	var out []string
	for _, f := range []struct {
		key       string
		different bool
	}{
		{"listen", old.Listen != now.Listen}, {"ledger", old.Ledger != now.Ledger}, {"recipes", old.Recipes != now.Recipes},
		{"calibrations", old.Calibrations != now.Calibrations}, {"images", old.Images != now.Images},
		{"max_frame_bytes", old.MaxFrameBytes != now.MaxFrameBytes}, {"workers", old.Workers != now.Workers},
		{"plugins", old.Plugins != now.Plugins}, {"development", old.Development != now.Development}, {"log_format", old.LogFormat != now.LogFormat},
		{"dirt_units", old.DirtUnits != now.DirtUnits}, {"dirt_px", old.DirtPx != now.DirtPx}, {"hold_on_dirt", old.HoldOnDirt != now.HoldOnDirt},
		{"people", old.People != now.People}, {"reflection", old.Reflection != now.Reflection},
	} {
		if f.different {
			out = append(out, f.key)
		}
	}
	return out
}
