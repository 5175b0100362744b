package main

import (
	"path"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"lapgate/pipeline"
)

// pattern reads a frame's header fields from its file name, such as
// "{line}/{unit}_{view}.pgm". It is matched against as many last parts of the path as
// it has itself. A pattern without a picture's extension takes any.
type pattern struct {
	text     string
	re       *regexp.Regexp
	fields   []string
	depth    int  // parts of the path it looks at
	anyImage bool // the extension is cut off before matching
}

const defaultPattern = "{unit}_{view}"

// anything is the field whose value is not used.
const anything = "_"

func patternFields() []string {
	return []string{"part", "revision", "surface", "process", "lot", "unit", "line", "station", "attempt", "purpose",
		"view", "index", "count", "camera_id", "frame_counter", "request_id", anything}
}

func isNumber(field string) bool {
	return slices.Contains([]string{"attempt", "index", "count", "frame_counter"}, field)
}

func pictureExtensions() []string {
	return []string{".pgm", ".png", ".tif", ".tiff", ".jpg", ".jpeg", ".raw"}
}

func isPicture(name string) bool {
	return slices.Contains(pictureExtensions(), strings.ToLower(path.Ext(name)))
}

// parsePattern refuses unknown, repeated and touching fields, and braces without a
// partner; the error says where.
func parsePattern(text string) (*pattern, error) {
	p := &pattern{text: text, depth: strings.Count(text, "/") + 1, anyImage: !isPicture(text)}
	expr := "^"
	rest, touching := text, false
	for rest != "" {
		literal, after, found := strings.Cut(rest, "{")
		if strings.Contains(literal, "}") {
			return nil, pipeline.Invalid("pattern %q: } without { before it", text)
		}
		if found && literal == "" && touching {
			return nil, pipeline.Invalid("pattern %q: two fields without a character between them cannot be told apart", text)
		}
		expr += regexp.QuoteMeta(literal)
		if !found {
			break
		}
		field, tail, closed := strings.Cut(after, "}")
		if !closed {
			return nil, pipeline.Invalid("pattern %q: { without } after it", text)
		}
		if err := p.addField(field); err != nil {
			return nil, err
		}
		expr += fieldExpression(field)
		rest, touching = tail, true
	}
	re, err := regexp.Compile(expr + "$")
	if err != nil {
		return nil, pipeline.Invalid("pattern %q: %v", text, err)
	}
	p.re = re
	return p, nil
}

func (p *pattern) addField(field string) error {
	_, isTag := strings.CutPrefix(field, "tag.")
	if !isTag && !slices.Contains(patternFields(), field) {
		return pipeline.Invalid("pattern %q: got field {%s}, want one of %v or tag.NAME", p.text, field, patternFields())
	}
	if field != anything && slices.Contains(p.fields, field) {
		return pipeline.Invalid("pattern %q: {%s} stands twice", p.text, field)
	}
	p.fields = append(p.fields, field)
	return nil
}

func fieldExpression(field string) string {
	switch {
	case isNumber(field):
		return "([0-9]+)"
	case field == anything:
		return "([^/]*)"
	}
	return "([A-Za-z0-9._-]+)"
}

// apply fills the header from a path with slashes. The first field takes as much as
// it can. A nil pattern fills nothing.
func (p *pattern) apply(name string, h *pipeline.FrameHeader) error {
	if p == nil {
		return nil
	}
	parts := strings.Split(name, "/")
	tail := strings.Join(parts[max(0, len(parts)-p.depth):], "/")
	if p.anyImage {
		tail = strings.TrimSuffix(tail, path.Ext(tail))
	}
	m := p.re.FindStringSubmatch(tail)
	if m == nil {
		return pipeline.Invalid("file name: got %q, want the pattern %q", tail, p.text)
	}
	for i, field := range p.fields {
		if err := setField(h, field, m[i+1]); err != nil {
			return err
		}
	}
	return nil
}

func setField(h *pipeline.FrameHeader, field, value string) error {
	if tag, ok := strings.CutPrefix(field, "tag."); ok {
		if h.Tags == nil {
			h.Tags = map[string]string{}
		}
		h.Tags[tag] = value
		return nil
	}
	if isNumber(field) {
		return setNumber(h, field, value)
	}
	words := map[string]*string{"part": &h.Part, "revision": &h.Revision, "surface": &h.Surface, "process": &h.Process,
		"lot": &h.Lot, "unit": &h.Unit, "line": &h.Line, "station": &h.Station, "view": &h.View,
		"camera_id": &h.CameraID, "request_id": &h.RequestID, "purpose": (*string)(&h.Purpose)}
	if at, ok := words[field]; ok {
		*at = value
	}
	return nil
}

func setNumber(h *pipeline.FrameHeader, field, value string) error {
	n, err := strconv.ParseUint(value, 10, 63)
	if err != nil || (n > 1<<31-1 && field != "frame_counter") {
		return pipeline.Invalid("%s: got %q in the file name, want a whole number", field, value)
	}
	switch field {
	case "attempt":
		h.Attempt = int(n)
	case "index":
		h.Index = int(n)
	case "count":
		h.Count = int(n)
	case "frame_counter":
		h.FrameCounter = n
	}
	return nil
}
