package main

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"time"

	"github.com/spf13/cobra"

	"lapgate/cmd/lapgate/spool"
	"lapgate/pipeline"
	"lapgate/proto/inspectpb"
)

// feedFlags is the command line of the feed verb.
type feedFlags struct {
	feedLimits
	server     string
	watch      bool
	header     pipeline.FrameHeader
	purpose    string
	tags       map[string]string
	pattern    string
	bits       int
	rate       float64
	spoolDir   string
	spoolBytes int64
	moveTo     string
	rejectCmd  string
	rejectTime time.Duration
	poll       time.Duration
	settle     time.Duration
	heartbeat  time.Duration
	needHeader bool
	quiet      bool
}

func feedCommand() *cobra.Command {
	var f feedFlags
	c := &cobra.Command{
		Use:   "feed PICTURE|FOLDER…  |  feed --watch FOLDER  |  feed -",
		Short: "Send frames, keep them until their verdict came, and print the verdicts",
		Long: `Send frames to the server and print one JSON line for each verdict.

A frame's header comes from a JSON file beside the picture (U1_ring.json, or
U1_ring.header.json, beside U1_ring.pgm), else from the picture's name by --pattern,
else from the flags. "-" reads the names of pictures from stdin, one a line.

Fields of --pattern: {part} {revision} {surface} {process} {lot} {unit} {line}
{station} {attempt} {purpose} {view} {index} {count} {camera_id} {frame_counter}
{request_id} {tag.NAME}, and {_} for what is not used.

A --watch that is started again sends what still lies in the folder once more, and gets
the stored verdicts; --move-to keeps the folder short.

While no server answers, frames are kept in the folder --spool and sent later; they are
marked, and their verdicts are holds with the reason late, since the part has gone.
Status 0: every unit got its verdict, whatever it is. 1: a unit is without, a frame was
refused or a file could not be taken.`,
		Args: cobra.MinimumNArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			return f.run(c.Context(), args, c.InOrStdin(), c.OutOrStdout(), c.ErrOrStderr())
		},
	}
	server := serverFlag(c)
	c.PreRun = func(*cobra.Command, []string) { f.server = *server }
	f.sourceFlags(c)
	f.headerFlags(c)
	f.sendFlags(c)
	return c
}

func (f *feedFlags) sourceFlags(c *cobra.Command) {
	fs := c.Flags()
	fs.BoolVar(&f.watch, "watch", false, "go on taking pictures from the folder as they are completed (*.tmp are not)")
	fs.StringVar(&f.pattern, "pattern", "", "where the picture's name holds header fields, such as {line}/{unit}_{view}.pgm (default "+defaultPattern+", or none with --unit and --view)")
	fs.IntVar(&f.bits, "significant-bits", 0, "bits that carry information in 16-bit pictures: 10, 12 or 16; 0 = as the file says")
	fs.BoolVar(&f.needHeader, "wait-for-header", false, "with --watch: a picture counts only with the header beside it")
	fs.DurationVar(&f.poll, "poll", time.Second, "with --watch: how often to look, beside file events")
	fs.DurationVar(&f.settle, "settle", 300*time.Millisecond, "with --watch: a picture is complete when it did not change for so long")
	fs.Float64Var(&f.rate, "rate", 0, "most frames per second; 0 = no limit")
	fs.StringVar(&f.moveTo, "move-to", "", "move a picture and its header to this folder once its unit has a verdict")
}

func (f *feedFlags) headerFlags(c *cobra.Command) {
	fs := c.Flags()
	for _, w := range []struct {
		at         *string
		name, text string
	}{
		{&f.header.Part, "part", "part number"}, {&f.header.Revision, "revision", "revision of the part"},
		{&f.header.Surface, "surface", "surface of the part"}, {&f.header.Process, "process", "how the part was made"},
		{&f.header.Lot, "lot", "lot"}, {&f.header.Unit, "unit", "unit, where all frames are of one"},
		{&f.header.Line, "line", "line"}, {&f.header.Station, "station", "station"}, {&f.header.View, "view", "view"},
		{&f.header.CameraID, "camera-id", "camera"},
	} {
		fs.StringVar(w.at, w.name, "", w.text+", where name and header do not say")
	}
	fs.StringVar(&f.purpose, "purpose", string(pipeline.Production), "production, master, study, setup or recheck")
	fs.IntVar(&f.header.Attempt, "attempt", 1, "attempt; 0 asks the server for the next one")
	fs.IntVar(&f.header.Count, "frames", 0, "frames in a view; 0 = as many as the folder has of it, else 1")
	fs.IntVar(&f.header.AnswerWithinMS, "answer-within-ms", 0, "how long the line waits for a verdict; 0 = no limit")
	fs.Float64Var(&f.header.ExposureUS, "exposure-us", 0, "exposure in µs, as in the calibration")
	fs.Float64Var(&f.header.GainDB, "gain-db", 0, "gain in dB, as in the calibration")
	fs.Float64Var(&f.header.BlackLevel, "black-level", 0, "black level in DN, as in the calibration")
	fs.StringToStringVar(&f.tags, "tag", nil, "tags such as tool=7,shift=late")
}

func (f *feedFlags) sendFlags(c *cobra.Command) {
	fs := c.Flags()
	fs.IntVar(&f.inFlight, "in-flight", 8, "units sent and not yet answered, at most")
	fs.IntVar(&f.retryHolds, "retry-holds", 0, "show a unit again as the next attempt, so often, after a hold only for missing view, stage failed or late")
	fs.StringVar(&f.spoolDir, "spool", "lapgate-spool", "folder that keeps frames while the server is away; none = keep them in memory")
	fs.Int64Var(&f.spoolBytes, "spool-bytes", 20e9, "most bytes in the spool; beyond it no more frames are taken")
	fs.BoolVar(&f.alwaysSpool, "spool-always", false, "keep every frame on disk before it is sent")
	fs.DurationVar(&f.lateAfter, "late-after", time.Second, "a frame without answer_within_ms that waited longer for a server is late")
	fs.DurationVar(&f.answerTime, "answer-time", 2*time.Minute, "a stream that is silent for so long is opened anew")
	fs.DurationVar(&f.giveUp, "give-up", 30*time.Second, "how long to look for the server once all frames are taken")
	fs.DurationVar(&f.drain, "drain", 10*time.Second, "how long to wait for due verdicts when told to stop")
	fs.DurationVar(&f.heartbeat, "heartbeat", 5*time.Second, "how often to tell the server that the stations are there; 0 = never")
	fs.StringVar(&f.rejectCmd, "reject-cmd", "", "program and arguments to run for each unit that is not accepted, with its JSON on stdin; no shell")
	fs.DurationVar(&f.rejectTime, "reject-cmd-time", 10*time.Second, "after which the program is ended and counts as failed")
	fs.BoolVar(&f.quiet, "quiet", false, "no progress bar")
}

func (f *feedFlags) check(args []string) error {
	switch {
	case f.inFlight < 1:
		return pipeline.Invalid("in-flight: got %d, want at least 1", f.inFlight)
	case f.retryHolds < 0:
		return pipeline.Invalid("retry-holds: got %d, want 0 or more", f.retryHolds)
	case f.watch && len(args) != 1:
		return pipeline.Invalid("watch: got %d folders, want one", len(args))
	case f.poll <= 0 || f.settle <= 0:
		return pipeline.Invalid("poll and settle: got %v and %v, want both above 0", f.poll, f.settle)
	case f.alwaysSpool && f.spoolDir == "none":
		return pipeline.Invalid("spool-always: want a folder in --spool, got none")
	}
	return nil
}

func (f *feedFlags) run(ctx context.Context, args []string, stdin io.Reader, stdout, stderr io.Writer) error {
	if err := f.check(args); err != nil {
		return err
	}
	log := slog.New(slog.NewTextHandler(stderr, nil))
	src, total, err := f.source(args, stdin, log)
	if err != nil {
		return err
	}
	conn, err := connect(f.server)
	if err != nil {
		return pipeline.Invalid("server: %v", err)
	}
	defer conn.Close()
	feed := &feeder{feedLimits: f.feedLimits, client: inspectpb.NewInspectionServiceClient(conn), out: output{w: stdout}, log: log,
		moveTo: f.moveTo, now: time.Now}
	feed.firstRetry, feed.lastRetry, feed.refusedWait = 200*time.Millisecond, 10*time.Second, 30*time.Second
	if f.spoolDir != "none" {
		if feed.spool, err = spool.Open(f.spoolDir, f.spoolBytes); err != nil {
			return err
		}
		defer feed.spool.Close()
	}
	if f.rejectCmd != "" {
		if feed.out.reject, err = newRejecter(f.rejectCmd, f.rejectTime, log); err != nil {
			return err
		}
	}
	if f.quiet {
		total = 0
	}
	beating, stop := context.WithCancel(ctx)
	defer stop()
	feed.heart = startHeart(beating, feed.client, f.heartbeat, log)
	feed.heart.add(f.header.Line, f.header.Station)
	return feed.runAndTell(ctx, paced(src, f.rate), stderr, total)
}

// runAndTell feeds, waits for the reject command, and prints the summary.
func (f *feeder) runAndTell(ctx context.Context, s source, stderr io.Writer, total int) error {
	f.progress = showProgress(stderr, total)
	err := f.run(ctx, s)
	f.progress.stop()
	failed := 0
	if f.out.reject != nil {
		failed = f.out.reject.close()
	}
	c := f.counts
	fmt.Fprintf(stderr, "%d frames taken; %d verdicts: %d accept, %d reject, %d hold (%d late, %d stored before, %d shown again)\n",
		c.frames, c.units, c.accepted, c.rejected, c.heldUnits, c.late, c.stored, c.retried)
	if err == nil && failed > 0 {
		err = fmt.Errorf("the reject command failed for %d units; they are in the messages above", failed)
	}
	return err
}

// namePattern returns the pattern, nil where names say nothing.
func (f *feedFlags) namePattern() (*pattern, error) {
	switch {
	case f.pattern != "":
		return parsePattern(f.pattern)
	case f.header.Unit != "" && f.header.View != "":
		return nil, nil
	}
	return parsePattern(defaultPattern)
}

// source returns where the frames come from, and how many there are where that is known.
func (f *feedFlags) source(args []string, stdin io.Reader, log *slog.Logger) (source, int, error) {
	p, err := f.namePattern()
	if err != nil {
		return nil, 0, err
	}
	f.header.Purpose, f.header.Tags = pipeline.Purpose(f.purpose), f.tags
	r := frameReader{pattern: p, defaults: f.header, bits: f.bits, now: time.Now}
	switch {
	case f.watch:
		f.live = true
		if !exists(args[0]) {
			return nil, 0, pipeline.Invalid("watch: no folder %s", args[0])
		}
		w := &watcher{dir: args[0], poll: f.poll, settle: f.settle, needsHeader: f.needHeader, reader: r, log: log}
		return w.source(), 0, nil
	case len(args) == 1 && args[0] == "-":
		f.live = true
		return listSource(r, stdin), 0, nil
	}
	paths, err := picturesOf(args)
	if err != nil {
		return nil, 0, err
	}
	return folderSource(r, paths), len(paths), nil
}
