package configs

import (
	_ "embed"
	"fmt"
	"net"
	"reflect"
	"slices"
	"strconv"
	"strings"
)

// DefaultServerFile is the server's settings file with every default and its comment.
//
//go:embed server.yaml
var DefaultServerFile []byte

// Server is the settings of the server program. It is a plain value: what was read is
// not changed afterwards. The help of each field says meaning, unit and what zero does;
// it is the comment in server.yaml and the help of the flag.
type Server struct {
	Listen           string `yaml:"listen" help:"host:port where line PCs and clients connect (gRPC). Port 0 picks a free one. It cannot be empty."`
	Ledger           string `yaml:"ledger" help:"Where the ledger is kept: a file (SQLite) or a postgres:// address. It cannot be empty."`
	Recipes          string `yaml:"recipes" help:"Folder of recipes, one file per part number; watched. It cannot be empty."`
	Calibrations     string `yaml:"calibrations" help:"Folder of calibrations. It cannot be empty."`
	Images           string `yaml:"images" help:"Folder where frames are kept. Empty keeps none."`
	KeepImages       string `yaml:"keep_images" help:"Which frames are kept: none, rejects_and_holds or all. It cannot be empty."`
	ImagesQuotaBytes int64  `yaml:"images_quota_bytes" help:"Bytes of kept frames, at most; the oldest go first. 0 = no bound."`
	MaxBytesInFlight int64  `yaml:"max_bytes_in_flight" help:"Bytes of frames held in memory at once, in all; beyond it clients are told to try again. It cannot be 0."`
	MaxFrameBytes    int64  `yaml:"max_frame_bytes" help:"Bytes of one frame, at most. It cannot be 0."`
	Workers          int    `yaml:"workers" help:"Frames worked on at once. 0 = as many as there are processors."`
	ViewTimeoutMS    int    `yaml:"view_timeout_ms" help:"Milliseconds to wait for all views of a showing, where the recipe does not say; then the unit is held. It cannot be 0."`
	DirtUnits        int    `yaml:"dirt_units" help:"Successive units of a station with a defect at the same place of a view's camera that raise the alarm \"dirt or hot pixel\"; as many without one clear it. 0 = no such alarm."`
	DirtPx           int    `yaml:"dirt_px" help:"Pixels that such places may lie apart. It cannot be 0."`
	HoldOnDirt       bool   `yaml:"hold_on_dirt" help:"Holds the units of a station while such an alarm is open. false = the alarm changes no verdict."`
	LogLevel         string `yaml:"log_level" help:"What is logged: debug, info, warn or error, and what is worse. It cannot be empty."`
	LogFormat        string `yaml:"log_format" help:"How it is logged: json (one object a line) or text (for a person at a terminal). It cannot be empty."`
	Development      bool   `yaml:"development" help:"Lets every good recipe judge as soon as it is saved, without approval; not for units that ship. false = a second person approves each recipe."`
	People           string `yaml:"people" help:"File that lists people and their roles. Empty keeps no list: every name may do everything."`
	Plugins          string `yaml:"plugins" help:"File that lists the stages that run in processes of their own. Empty keeps to the stages inside: no plug-in is started."`
	Reflection       bool   `yaml:"reflection" help:"Lets clients ask which services there are (gRPC reflection). false = no."`
	ShutdownGraceMS  int    `yaml:"shutdown_grace_ms" help:"Milliseconds for units under way to finish when the server stops; the rest is held. 0 = none."`
}

// DefaultServer returns the settings of an empty file.
func DefaultServer() Server {
	return Server{
		Listen: "127.0.0.1:7391", Ledger: "lapgate.db", Recipes: "recipes", Calibrations: "calibrations", Images: "images", KeepImages: "rejects_and_holds", ImagesQuotaBytes: 100 << 30,
		MaxBytesInFlight: 1 << 30, MaxFrameBytes: 128 << 20, ViewTimeoutMS: 2000, DirtUnits: 5, DirtPx: 3, LogLevel: "info", LogFormat: "json", Reflection: true, ShutdownGraceMS: 5000,
	}
}

// logLevels are the values of log_level.
func logLevels() []string { return []string{"debug", "info", "warn", "error"} }

// logFormats are the values of log_format.
func logFormats() []string { return []string{"json", "text"} }

// keepPolicies are the values of keep_images.
func keepPolicies() []string { return []string{"none", "rejects_and_holds", "all"} }

// check returns a problem for every setting that cannot be used, by key.
func (s Server) check() []Problem {
	var out []Problem
	wrong := func(bad bool, key string, got any, want string) {
		if bad {
			out = append(out, Problem{Path: key, Found: fmt.Sprintf("got %v", got), Want: want})
		}
	}
	wrong(!isAddress(s.Listen), "listen", strconv.Quote(s.Listen), "host:port, such as 127.0.0.1:7391")
	for _, f := range []struct{ key, value string }{{"ledger", s.Ledger}, {"recipes", s.Recipes}, {"calibrations", s.Calibrations}} {
		wrong(strings.TrimSpace(f.value) == "", f.key, strconv.Quote(f.value), "a path")
	}
	wrong(!slices.Contains(keepPolicies(), s.KeepImages), "keep_images", strconv.Quote(s.KeepImages), "one of "+strings.Join(keepPolicies(), ", "))
	wrong(s.ImagesQuotaBytes < 0, "images_quota_bytes", s.ImagesQuotaBytes, "0 (no bound) or more")
	wrong(s.MaxFrameBytes < 1, "max_frame_bytes", s.MaxFrameBytes, "1 or more")
	wrong(s.MaxBytesInFlight < max(s.MaxFrameBytes, 1), "max_bytes_in_flight", s.MaxBytesInFlight, fmt.Sprintf("max_frame_bytes (%d) or more", s.MaxFrameBytes))
	wrong(s.Workers < 0 || s.Workers > 1024, "workers", s.Workers, "0 to 1024")
	wrong(s.ViewTimeoutMS < 1 || s.ViewTimeoutMS > 3_600_000, "view_timeout_ms", s.ViewTimeoutMS, "1 to 3600000")
	wrong(s.DirtUnits < 0 || s.DirtUnits == 1 || s.DirtUnits > 1000, "dirt_units", s.DirtUnits, "0 (no alarm) or 2 to 1000")
	wrong(s.DirtPx < 1 || s.DirtPx > 1000, "dirt_px", s.DirtPx, "1 to 1000")
	wrong(s.HoldOnDirt && s.DirtUnits == 0, "hold_on_dirt", s.HoldOnDirt, "false while dirt_units is 0")
	wrong(s.ShutdownGraceMS < 0 || s.ShutdownGraceMS > 3_600_000, "shutdown_grace_ms", s.ShutdownGraceMS, "0 to 3600000")
	wrong(!slices.Contains(logLevels(), s.LogLevel), "log_level", strconv.Quote(s.LogLevel), "one of "+strings.Join(logLevels(), ", "))
	wrong(!slices.Contains(logFormats(), s.LogFormat), "log_format", strconv.Quote(s.LogFormat), "one of "+strings.Join(logFormats(), ", "))
	return out
}

func isAddress(s string) bool {
	_, port, err := net.SplitHostPort(s)
	if err != nil {
		return false
	}
	n, err := strconv.Atoi(port)
	return err == nil && n >= 0 && n <= 65535
}

// serverFile writes settings as a file with the help of each as its comment.
func serverFile(s Server) []byte {
	var b strings.Builder
	b.WriteString("# Settings of the server. Each can also be given by a flag (--view-timeout-ms) or by\n" +
		"# an environment variable (LAPGATE_VIEW_TIMEOUT_MS): flags win over variables, variables\n" +
		"# over this file.\nformat: 1\n")
	v := reflect.ValueOf(s)
	for _, f := range fieldsOf(v.Type()) {
		sf := v.Type().FieldByIndex(f.index)
		b.WriteString("\n# " + wrapped(sf.Tag.Get("help"), 86) + "\n")
		value := fmt.Sprint(v.FieldByIndex(f.index))
		if sf.Type.Kind() == reflect.String {
			value = strconv.Quote(value)
		}
		b.WriteString(f.key + ": " + value + "\n")
	}
	return []byte(b.String())
}

// wrapped breaks a sentence into comment lines of at most width characters.
func wrapped(text string, width int) string {
	line, out := "", ""
	for word := range strings.FieldsSeq(text) {
		if line != "" && len(line)+1+len(word) > width {
			out += line + "\n# "
			line = ""
		}
		line = strings.TrimSpace(line + " " + word)
	}
	return out + line
}
