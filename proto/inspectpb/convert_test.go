package inspectpb

import (
	"fmt"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"lapgate/pipeline"
	"lapgate/pipeline/raster"
)

// fill gives every field below v a value that is not its zero value, so that a field
// which a converter forgets comes back different.
func fill(rng *rand.Rand, v reflect.Value) {
	switch v.Interface().(type) {
	case pipeline.Purpose:
		v.SetString(string(pick(rng, pipeline.Purposes())))
		return
	case pipeline.Verdict:
		v.SetString(string(pick(rng, []pipeline.Verdict{pipeline.Accept, pipeline.Reject, pipeline.Hold})))
		return
	case raster.PixelFormat:
		v.SetUint(uint64(pick(rng, raster.PixelFormats())))
		return
	case time.Time:
		v.Set(reflect.ValueOf(time.Unix(rng.Int64N(1<<33), rng.Int64N(1e9)).UTC()))
		return
	}
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			fill(rng, v.Field(i))
		}
	case reflect.Pointer:
		v.Set(reflect.New(v.Type().Elem()))
		fill(rng, v.Elem())
	case reflect.Slice:
		v.Set(reflect.MakeSlice(v.Type(), 1+rng.IntN(3), 3))
		for i := range v.Len() {
			fill(rng, v.Index(i))
		}
	case reflect.Map:
		v.Set(reflect.MakeMap(v.Type()))
		for range 1 + rng.IntN(3) {
			key, value := reflect.New(v.Type().Key()).Elem(), reflect.New(v.Type().Elem()).Elem()
			fill(rng, key)
			fill(rng, value)
			v.SetMapIndex(key, value)
		}
	default:
		fillScalar(rng, v)
	}
}

func fillScalar(rng *rand.Rand, v reflect.Value) {
	switch v.Kind() {
	case reflect.String:
		v.SetString(fmt.Sprintf("word µ%d", rng.IntN(1e9)))
	case reflect.Int:
		v.SetInt(1 + rng.Int64N(1<<31-1))
	case reflect.Uint32, reflect.Uint64:
		v.SetUint(1 + rng.Uint64N(1<<v.Type().Bits()-1))
	case reflect.Float64:
		v.SetFloat(rng.NormFloat64() * 1e3)
	case reflect.Bool:
		v.SetBool(true)
	default:
		panic("a kind of field that the test cannot fill: " + v.Type().String())
	}
}

func pick[T any](rng *rand.Rand, list []T) T { return list[rng.IntN(len(list))] }

// roundTrip goes through bytes, so that what does not survive the wire is seen too.
func roundTrip[P any, M proto.Message](t *testing.T, from func(P) M, to func(M) (P, error)) {
	t.Helper()
	rng := rand.New(rand.NewPCG(1, 2))
	for range 50 {
		var in P
		fill(rng, reflect.ValueOf(&in).Elem())
		text, err := proto.Marshal(from(in))
		if err != nil {
			t.Fatal(err)
		}
		m := from(in).ProtoReflect().New().Interface().(M)
		if err := proto.Unmarshal(text, m); err != nil {
			t.Fatal(err)
		}
		got, err := to(m)
		if err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(got, in) {
			a, b := parting(fmt.Sprintf("%+v", got), fmt.Sprintf("%+v", in))
			t.Fatalf("came back different\n got …%s…\nwant …%s…", a, b)
		}
	}
}

// parting returns both texts around the first place where they differ.
func parting(a, b string) (string, string) {
	i := 0
	for i < min(len(a), len(b)) && a[i] == b[i] {
		i++
	}
	around := func(s string) string { return s[max(0, i-80):min(len(s), i+40)] }
	return around(a), around(b)
}

func sure[M, P any](f func(M) P) func(M) (P, error) {
	return func(m M) (P, error) { return f(m), nil }
}

func TestRoundTrip(t *testing.T) {
	t.Run("Identity", func(t *testing.T) { roundTrip(t, FromIdentity, ToIdentity) })
	t.Run("FrameHeader", func(t *testing.T) { roundTrip(t, FromFrameHeader, ToFrameHeader) })
	t.Run("Defect", func(t *testing.T) { roundTrip(t, FromDefect, sure(ToDefect)) })
	t.Run("Failure", func(t *testing.T) { roundTrip(t, FromFailure, sure(ToFailure)) })
	t.Run("Reason", func(t *testing.T) { roundTrip(t, FromReason, ToReason) })
	t.Run("Judgement", func(t *testing.T) { roundTrip(t, FromJudgement, ToJudgement) })
	t.Run("Evidence", func(t *testing.T) { roundTrip(t, FromEvidence, ToEvidence) })
}

// TestEveryWireFieldIsSet finds a field of the contract that no converter writes.
func TestEveryWireFieldIsSet(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	var e pipeline.Evidence
	var j pipeline.Judgement
	fill(rng, reflect.ValueOf(&e).Elem())
	fill(rng, reflect.ValueOf(&j).Elem())
	requireSet(t, reflect.ValueOf(FromEvidence(e)), "Evidence")
	requireSet(t, reflect.ValueOf(FromJudgement(j)), "Judgement")
}

func requireSet(t *testing.T, v reflect.Value, path string) {
	t.Helper()
	if v.IsZero() {
		t.Errorf("%s is not set", path)
		return
	}
	switch v.Kind() {
	case reflect.Pointer:
		if _, leaf := v.Interface().(*timestamppb.Timestamp); !leaf {
			requireSet(t, v.Elem(), path)
		}
	case reflect.Slice:
		requireSet(t, v.Index(0), path+"[0]")
	case reflect.Struct:
		for i := range v.NumField() {
			if f := v.Type().Field(i); f.IsExported() {
				requireSet(t, v.Field(i), path+"."+f.Name)
			}
		}
	}
}

func TestEmptyValuesComeBackEmpty(t *testing.T) {
	e, err := ToEvidence(FromEvidence(pipeline.Evidence{}))
	if err != nil || !reflect.DeepEqual(e, pipeline.Evidence{}) {
		t.Errorf("got %+v, %v", e, err)
	}
	h := pipeline.FrameHeader{Identity: pipeline.Identity{Purpose: pipeline.Setup}}
	if got, err := ToFrameHeader(FromFrameHeader(h)); err != nil || !reflect.DeepEqual(got, h) {
		t.Errorf("got %+v, %v", got, err)
	}
}

func TestEveryEnumValueHasAWord(t *testing.T) {
	if got, want := len(purposes()), len(Purpose_name)-1; got != want || want != len(pipeline.Purposes()) {
		t.Errorf("purposes: table %d, wire %d, vocabulary %d", got, want, len(pipeline.Purposes()))
	}
	if got, want := len(verdicts()), len(Verdict_name)-1; got != want {
		t.Errorf("verdicts: table %d, wire %d", got, want)
	}
	for _, word := range Dispositions() {
		n, err := FromDisposition(word)
		back, err2 := ToDisposition(n)
		if err != nil || err2 != nil || back != word {
			t.Errorf("disposition %q came back as %q (%v, %v)", word, back, err, err2)
		}
	}
	if len(Dispositions()) != len(Disposition_name)-1 {
		t.Errorf("dispositions: vocabulary %d, wire %d", len(Dispositions()), len(Disposition_name)-1)
	}
}

func TestDecodingNamesTheField(t *testing.T) {
	nan := FromFrameHeader(pipeline.FrameHeader{Identity: pipeline.Identity{Purpose: pipeline.Setup}})
	nan.ExposureUs /= nan.ExposureUs
	for _, c := range []struct {
		want string
		err  error
	}{
		{"purpose: got PURPOSE_UNSPECIFIED, want one of [production", second(ToIdentity(&Identity{}))},
		{"purpose: got 77", second(ToIdentity(&Identity{Purpose: 77}))},
		{"identity: not given", second(ToFrameHeader(&FrameHeader{}))},
		{"header: not given", second(ToFrameHeader(nil))},
		{"exposure_us: got NaN", second(ToFrameHeader(nan))},
		{"captured: got", second(ToFrameHeader(&FrameHeader{Identity: &Identity{Purpose: 1}, Captured: &timestamppb.Timestamp{Nanos: -1}}))},
		{"verdict: got VERDICT_UNSPECIFIED, want one of [accept reject hold]", second(ToJudgement(&Judgement{}))},
		{"reasons[0]: verdict: got 9", second(ToJudgement(&Judgement{Verdict: 1, Reasons: []*Reason{{Verdict: 9}}}))},
		{"views[0]: frames[1]: header: not given", second(ToEvidence(&Evidence{Views: []*ViewEvidence{{Frames: []*FrameEvidence{{Header: &FrameHeader{Identity: &Identity{Purpose: 1}}}, {}}}}}))},
		{`disposition: got "scrap", want one of [accept reject clean rework]`, second(FromDisposition("scrap"))},
	} {
		if c.err == nil || !strings.HasPrefix(c.err.Error(), c.want) || pipeline.KindOf(c.err) != pipeline.InvalidKind {
			t.Errorf("got %v (kind %d), want an invalid-argument error starting with %q", c.err, pipeline.KindOf(c.err), c.want)
		}
	}
}

func second[T any](_ T, err error) error { return err }
