package ledger

import (
	"bytes"
	"compress/gzip"
	"io"
	"strings"
)

// zip packs evidence: its keys repeat with every defect, so it shrinks several times.
func zip(text string) ([]byte, error) {
	var out bytes.Buffer
	w, err := gzip.NewWriterLevel(&out, gzip.BestSpeed)
	if err != nil {
		return nil, err
	}
	if _, err := io.Copy(w, strings.NewReader(text)); err != nil {
		return nil, err
	}
	err = w.Close()
	return out.Bytes(), err
}

func unzip(packed []byte) (string, error) {
	r, err := gzip.NewReader(bytes.NewReader(packed))
	if err != nil {
		return "", err
	}
	text, err := io.ReadAll(r)
	return string(text), err
}
