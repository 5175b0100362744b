package main

import "io"

func evaluateTiles(o options, progress io.Writer) (*result, error) { return &result{}, nil }
func chooseTiles(o options, out io.Writer) error                   { return nil }
