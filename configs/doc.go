// Package configs holds the YAML files and the code that reads them strictly; it decides
// nothing about parts and runs no stage.
//
// Every file starts with `format: 1`. An unknown, repeated or missing key, a wrong type, a
// number that is not finite, an empty or half-saved file: each is a Problem with file,
// line, column, what was found and what is wanted, and all that can be found are
// reported at once. Anchors, aliases, merge keys and tags of YAML are refused: a recipe
// says plainly what it means.
package configs
