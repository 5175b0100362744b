package inspectpb

import (
	"fmt"
	"math"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	"lapgate/pipeline"
)

// What a person can decide about a hold.
const (
	DispositionAccept = "accept"
	DispositionReject = "reject"
	DispositionClean  = "clean"
	DispositionRework = "rework"
)

// Dispositions lists the dispositions in a fixed order.
func Dispositions() []string {
	return []string{DispositionAccept, DispositionReject, DispositionClean, DispositionRework}
}

// enum pairs a word of the vocabulary with its number on the wire.
type enum[W, N comparable] struct {
	word   W
	number N
}

func purposes() []enum[pipeline.Purpose, Purpose] {
	return []enum[pipeline.Purpose, Purpose]{
		{pipeline.Production, Purpose_PURPOSE_PRODUCTION},
		{pipeline.Master, Purpose_PURPOSE_MASTER},
		{pipeline.Study, Purpose_PURPOSE_STUDY},
		{pipeline.Setup, Purpose_PURPOSE_SETUP},
		{pipeline.Recheck, Purpose_PURPOSE_RECHECK},
	}
}

func verdicts() []enum[pipeline.Verdict, Verdict] {
	return []enum[pipeline.Verdict, Verdict]{
		{pipeline.Accept, Verdict_VERDICT_ACCEPT},
		{pipeline.Reject, Verdict_VERDICT_REJECT},
		{pipeline.Hold, Verdict_VERDICT_HOLD},
	}
}

func dispositions() []enum[string, Disposition] {
	return []enum[string, Disposition]{
		{DispositionAccept, Disposition_DISPOSITION_ACCEPT},
		{DispositionReject, Disposition_DISPOSITION_REJECT},
		{DispositionClean, Disposition_DISPOSITION_CLEAN},
		{DispositionRework, Disposition_DISPOSITION_REWORK},
	}
}

// numberOf returns the number of a word, 0 (unspecified) for a word it does not know.
func numberOf[W, N comparable](table []enum[W, N], word W) N {
	for _, e := range table {
		if e.word == word {
			return e.number
		}
	}
	var unspecified N
	return unspecified
}

func wordOf[W, N comparable](field string, table []enum[W, N], number N) (W, error) {
	words := make([]W, 0, len(table))
	for _, e := range table {
		if e.number == number {
			return e.word, nil
		}
		words = append(words, e.word)
	}
	var none W
	return none, pipeline.Invalid("%s: got %v, want one of %v", field, fmt.Sprint(number), words)
}

// FromPurpose returns the wire's number, PURPOSE_UNSPECIFIED for an unknown word.
func FromPurpose(p pipeline.Purpose) Purpose { return numberOf(purposes(), p) }

// ToPurpose refuses an unspecified or unknown purpose.
func ToPurpose(p Purpose) (pipeline.Purpose, error) { return wordOf("purpose", purposes(), p) }

// FromVerdict returns the wire's number, VERDICT_UNSPECIFIED for an unknown word.
func FromVerdict(v pipeline.Verdict) Verdict { return numberOf(verdicts(), v) }

// ToVerdict refuses an unspecified or unknown verdict.
func ToVerdict(v Verdict) (pipeline.Verdict, error) { return wordOf("verdict", verdicts(), v) }

// FromDisposition returns the wire's number; an unknown word is an error.
func FromDisposition(word string) (Disposition, error) {
	n := numberOf(dispositions(), word)
	if n == Disposition_DISPOSITION_UNSPECIFIED {
		return n, pipeline.Invalid("disposition: got %q, want one of %v", word, Dispositions())
	}
	return n, nil
}

// ToDisposition refuses an unspecified or unknown disposition.
func ToDisposition(d Disposition) (string, error) { return wordOf("disposition", dispositions(), d) }

// FromTime returns nil for the zero time.
func FromTime(t time.Time) *timestamppb.Timestamp {
	if t.IsZero() {
		return nil
	}
	return timestamppb.New(t)
}

// ToTime returns the zero time for nil, else UTC; field names it in the error.
func ToTime(field string, t *timestamppb.Timestamp) (time.Time, error) {
	if t == nil {
		return time.Time{}, nil
	}
	if err := t.CheckValid(); err != nil {
		return time.Time{}, pipeline.Invalid("%s: got %v, want a time between the years 1 and 9999", field, err)
	}
	return t.AsTime(), nil
}

// clamp32 keeps a number that the wire cannot hold at the nearest one that it can.
func clamp32(n int) int32 { return int32(max(math.MinInt32, min(n, math.MaxInt32))) }

// each converts every element; nil for none.
func each[A, B any](in []A, convert func(A) B) []B {
	if len(in) == 0 {
		return nil
	}
	out := make([]B, len(in))
	for i, a := range in {
		out[i] = convert(a)
	}
	return out
}

// tryEach is each for conversions that can fail; the error says which element.
func tryEach[A, B any](field string, in []A, convert func(A) (B, error)) ([]B, error) {
	if len(in) == 0 {
		return nil, nil
	}
	out := make([]B, len(in))
	for i, a := range in {
		b, err := convert(a)
		if err != nil {
			return nil, fmt.Errorf("%s[%d]: %w", field, i, err)
		}
		out[i] = b
	}
	return out, nil
}
