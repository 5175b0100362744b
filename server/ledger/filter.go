package ledger

import (
	"encoding/json"
	"fmt"
	"strconv"
	"strings"
	"time"

	"lapgate/pipeline"
)

// Filter picks inspections. An empty field picks all, but for Purpose.
type Filter struct {
	Part, Surface, Process, Lot, Unit, Line, Station string
	Recipe                                           string           // text hash
	Purpose                                          pipeline.Purpose // empty = production
	AnyPurpose                                       bool
	Verdict                                          pipeline.Verdict // the line's
	Reason                                           string           // name of one of the line's reasons
	From, To                                         time.Time        // of the counted time; To is excluded
	NotJudgedBy                                      string           // recipe text hash: no judgement by it yet
	Shard, Shards                                    int              // the Shard-th, from 0, of Shards equal parts; 0 = no parts
}

// where collects conditions with numbered placeholders.
type where struct {
	conditions []string
	args       []any
}

// add adds a condition; every %s in it becomes the placeholder of the next value.
func (w *where) add(condition string, values ...any) {
	holders := make([]any, len(values))
	for i, v := range values {
		w.args = append(w.args, v)
		holders[i] = "$" + strconv.Itoa(len(w.args))
	}
	w.conditions = append(w.conditions, fmt.Sprintf(condition, holders...))
}

func (w *where) String() string {
	if len(w.conditions) == 0 {
		return "1 = 1"
	}
	return strings.Join(w.conditions, " AND ")
}

// dimensions adds what roll-ups and inspections can both be picked by.
func (f Filter) dimensions(w *where) {
	for _, d := range []struct{ column, value string }{
		{"part", f.Part}, {"surface", f.Surface}, {"process", f.Process}, {"lot", f.Lot},
		{"line", f.Line}, {"station", f.Station}, {"recipe", f.Recipe},
	} {
		if d.value != "" {
			w.add("i."+d.column+" = %s", d.value)
		}
	}
	if !f.AnyPurpose {
		p := f.Purpose
		if p == "" {
			p = pipeline.Production
		}
		w.add("i.purpose = %s", string(p))
	}
}

func (f Filter) where() (*where, error) {
	w := &where{}
	f.dimensions(w)
	if f.Unit != "" {
		w.add("i.unit = %s", f.Unit)
	}
	if f.Verdict != "" {
		if err := checkVerdict("verdict", f.Verdict); err != nil {
			return nil, err
		}
		w.add("i.verdict = %s", string(f.Verdict))
	}
	if f.Reason != "" {
		name, err := json.Marshal(f.Reason)
		if err != nil {
			return nil, err
		}
		w.add("EXISTS (SELECT 1 FROM judgements r WHERE r.inspection_id = i.id AND r.seq = 0 AND r.reasons LIKE %s)", `%"name":`+string(name)+`,%`)
	}
	if !f.From.IsZero() {
		w.add("i.counted_us >= %s", micros(f.From))
	}
	if !f.To.IsZero() {
		w.add("i.counted_us < %s", micros(f.To))
	}
	if f.NotJudgedBy != "" {
		w.add("NOT EXISTS (SELECT 1 FROM judgements n WHERE n.inspection_id = i.id AND n.recipe = %s)", f.NotJudgedBy)
	}
	return w, f.shard(w)
}

func (f Filter) shard(w *where) error {
	if f.Shards == 0 && f.Shard == 0 {
		return nil
	}
	if f.Shards < 1 || f.Shard < 0 || f.Shard >= f.Shards {
		return pipeline.Invalid("shard: got %d of %d, want one from 0 to one below their number", f.Shard, f.Shards)
	}
	w.add("i.id %% %s = %s", int64(f.Shards), int64(f.Shard)) // ids are random
	return nil
}
