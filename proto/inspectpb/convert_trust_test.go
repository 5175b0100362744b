package inspectpb

import (
	"strings"
	"testing"

	"google.golang.org/protobuf/reflect/protoreflect"

	"lapgate/pipeline"
)

// comesBack goes through every number of an enum: each has a word that gives the number
// again, but for the unspecified and for numbers that do not exist.
func comesBack[N interface {
	~int32
	protoreflect.Enum
}](t *testing.T, from func(string) N, to func(N) (string, error)) {
	t.Helper()
	var zero N
	values := zero.Descriptor().Values()
	for i := range values.Len() {
		n := N(values.Get(i).Number())
		word, err := to(n)
		if n == 0 {
			if pipeline.KindOf(err) != pipeline.InvalidKind {
				t.Errorf("the unspecified: word %q, error %v", word, err)
			}
			continue
		}
		if err != nil || from(word) != n {
			t.Errorf("%v: word %q, back %v, %v", n, word, from(word), err)
		}
	}
	if _, err := to(99); err == nil || !strings.Contains(err.Error(), "99") {
		t.Errorf("99: error %v, want one that names it", err)
	}
	if from("no such word") != 0 {
		t.Error("a word that does not exist has a number")
	}
}

func TestWordsOfTrustComeBack(t *testing.T) {
	comesBack(t, FromEffective, ToEffective)
	comesBack(t, FromCheckResult, ToCheckResult)
	comesBack(t, FromStationState, ToStationState)
}
