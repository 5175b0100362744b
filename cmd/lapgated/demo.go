package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"os/signal"
	"path/filepath"
	"syscall"
	"time"

	"github.com/spf13/cobra"

	"lapgate/configs"
	"lapgate/pipeline/render"
)

// demo is one run of the main job from embedded defaults.
type demo struct {
	*app
	client string // the lapgate program
	dir    string
	once   bool
	report string
	listen string
	units  int
	ctx    context.Context
	scene  render.Scene
	server *serving
	begun  time.Time // of the feed
	took   time.Duration
}

func (a *app) demoCommand() *cobra.Command {
	d := demo{app: a}
	cmd := &cobra.Command{
		Use:   "demo",
		Short: "Render, calibrate, serve, feed and report the demo scenario; everything in it is invented",
		Args:  cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
			defer stop()
			d.ctx = ctx
			return d.run()
		},
	}
	flags := cmd.Flags()
	flags.StringVar(&d.client, "client", "lapgate", "the lapgate program")
	flags.StringVar(&d.dir, "dir", "demo", "folder to work in; what an earlier demo left there is replaced")
	flags.BoolVar(&d.once, "once", false, "stop after the report")
	flags.StringVar(&d.report, "report", "", "write the figures as JSON to this file")
	flags.StringVar(&d.listen, "listen", "127.0.0.1:0", "host:port of the server; port 0 picks a free one")
	flags.IntVar(&d.units, "units", 0, "units to render; 0 = as many as the scene says")
	return cmd
}

func (d *demo) run() error {
	for _, step := range []func() error{d.prepare, d.renderFrames, d.calibrateViews, d.serve} {
		if err := step(); err != nil {
			return err
		}
	}
	err := d.feedAndReport()
	if err == nil && !d.once {
		fmt.Fprintf(d.out, "\nThe server stays up on %s until you interrupt it (Ctrl-C).\n", d.server.address())
		<-d.ctx.Done()
	}
	return errors.Join(err, d.server.stop())
}

func (d *demo) feedAndReport() error {
	if err := d.feed(); err != nil {
		return err
	}
	figures, err := d.figures()
	if err != nil {
		return err
	}
	if d.report != "" {
		if err := writeJSON(d.report, figures); err != nil {
			return err
		}
	}
	return d.print(figures)
}

func (d *demo) say(format string, args ...any) { fmt.Fprintf(d.err, "demo: "+format+"\n", args...) }

// prepare empties the folder of what an earlier demo left and writes the embedded files.
func (d *demo) prepare() error {
	d.say("everything you will see is invented: shop, parts, frames and figures")
	for _, name := range []string{"frames", "calibration", "truth.jsonl", "calibrations", "configs", "ledger.db", "ledger.db-wal", "ledger.db-shm", "spool", "images", "verdicts"} {
		if err := os.RemoveAll(filepath.Join(d.dir, name)); err != nil {
			return err
		}
	}
	if err := os.CopyFS(filepath.Join(d.dir, "configs"), configs.Demo); err != nil {
		return err
	}
	scene, _, err := configs.Load[render.Scene](d.path("configs/demo/scene.yaml"))
	d.scene = scene
	if d.units > 0 {
		d.scene.Units = d.units
	}
	return err
}

func (d *demo) path(name string) string { return filepath.Join(d.dir, filepath.FromSlash(name)) }

func (d *demo) renderFrames() error {
	d.say("rendering calibration frames and %d units of %d views", d.scene.Units, len(d.scene.Views))
	args := []string{"render", "--scene", d.path("configs/demo/scene.yaml"), "--out", d.dir}
	if d.units > 0 {
		args = append(args, "--units", fmt.Sprint(d.units))
	}
	return d.runClient(args, nil)
}

// runClient runs the lapgate program; its stdout goes to out, or is dropped.
func (d *demo) runClient(args []string, out *os.File) error {
	cmd := exec.CommandContext(d.ctx, d.client, args...)
	cmd.Stderr = d.err
	if out != nil {
		cmd.Stdout = out
	}
	if err := cmd.Run(); err != nil {
		return fmt.Errorf("%s %s: %w", d.client, args[0], err)
	}
	return nil
}

func (d *demo) serve() error {
	set := configs.DefaultServer()
	set.Listen, set.Ledger, set.Development = d.listen, d.path("ledger.db"), true
	set.Recipes, set.Calibrations, set.Images = d.path("configs/demo/recipes"), d.path("calibrations"), d.path("images")
	s, err := startServing(d.ctx, set, d.log)
	d.server = s
	return err
}

// feed streams the frames of all lines at once, each line by a client of its own.
func (d *demo) feed() error {
	if err := os.MkdirAll(d.path("verdicts"), 0o755); err != nil {
		return err
	}
	d.say("feeding %d lines over gRPC", len(d.scene.Lines))
	d.begun = time.Now()
	done := make(chan error, len(d.scene.Lines))
	for _, line := range d.scene.Lines {
		go func() { done <- d.feedLine(line.Name) }()
	}
	var errs []error
	for range d.scene.Lines {
		errs = append(errs, <-done)
	}
	d.took = time.Since(d.begun)
	return errors.Join(errs...)
}

func (d *demo) feedLine(line string) error {
	out, err := os.Create(d.path("verdicts/" + line + ".jsonl"))
	if err != nil {
		return err
	}
	defer out.Close()
	return d.runClient([]string{"feed", d.path("frames/" + line), "--server", d.server.address(), "--spool", d.path("spool/" + line)}, out)
}
