// Package stagetest is the suite that every stage must pass, whether compiled in or
// hosted in another process. It does not judge what a stage finds.
package stagetest
