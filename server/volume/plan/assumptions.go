package plan

import (
	"fmt"
	"reflect"
	"strings"
)

// Assumption is one figure of the plan with where it came from.
type Assumption struct {
	Path   string `json:"path"` // as in the file, items by name
	Value  string `json:"value"`
	Source string `json:"source"` // empty: not stated
}

// Assumptions lists every figure the plan rests on, in the order of the file.
// It walks the structs, so no figure can be left out.
func (p *Plan) Assumptions() []Assumption {
	var all []Assumption
	for _, top := range []struct {
		name  string
		value any
	}{{"working_time", p.WorkingTime}, {"demand", p.Demand}, {"outcomes", p.Outcomes}, {"reworks", p.Reworks},
		{"processes", p.Processes}, {"inspections", p.Inspections}, {"uncertainty", p.Uncertainty}} {
		walk(&all, top.name, "", reflect.ValueOf(top.value), Sources{})
	}
	return all
}

// walk descends to the leaves that are set. key is the field of the item that
// sources speak of.
func walk(all *[]Assumption, path, key string, v reflect.Value, s Sources) {
	if text, ok := said(v); ok {
		*all = append(*all, Assumption{path, text, sourceOf(v, s, key)})
		return
	}
	switch v.Kind() {
	case reflect.Pointer:
		if !v.IsNil() {
			walk(all, path, key, v.Elem(), s)
		}
	case reflect.Slice:
		for i := range v.Len() {
			walk(all, path+itemName(v.Index(i), i), key, v.Index(i), s)
		}
	case reflect.Struct:
		walkFields(all, path, key, v, s)
	default:
		if !v.IsZero() {
			*all = append(*all, Assumption{path, fmt.Sprint(v.Interface()), s.Of(key)})
		}
	}
}

func walkFields(all *[]Assumption, path, key string, v reflect.Value, s Sources) {
	if own := v.FieldByName("Sources"); own.IsValid() {
		s, key = own.Interface().(Sources), ""
	}
	for i := range v.NumField() {
		tag, _, _ := strings.Cut(v.Type().Field(i).Tag.Get("yaml"), ",")
		if tag == "" || tag == "-" || tag == "name" {
			continue
		}
		of := key
		if of == "" {
			of = tag
		}
		walk(all, path+"."+tag, of, v.Field(i), s)
	}
}

// said is the one-line form of values that read better whole.
func said(v reflect.Value) (string, bool) {
	if !v.CanInterface() {
		return "", false
	}
	switch x := v.Interface().(type) {
	case Count:
		return fmt.Sprintf("%d of %d", x.K, x.N), true
	case Beta:
		return fmt.Sprintf("Beta(%v, %v)", x.Alpha, x.Beta), true
	case LedgerFilter:
		return fmt.Sprintf("%s, corrected for the gate %s", x, x.Gate), true
	case PriceBreak:
		return fmt.Sprintf("%v from %v starts", x.Cost, max(1, x.FromStarts)), true
	case SizeShare:
		return fmt.Sprintf("%v of %v um", x.Share, x.SizeUm), true
	}
	return "", false
}

func sourceOf(v reflect.Value, s Sources, key string) string {
	if _, ok := v.Interface().(LedgerFilter); ok {
		return "the ledger"
	}
	return s.Of(key)
}

func itemName(v reflect.Value, i int) string {
	if v.Kind() == reflect.Struct {
		if name := v.FieldByName("Name"); name.IsValid() {
			return "." + name.String()
		}
	}
	return fmt.Sprintf("[%d]", i)
}

// From says in words where a yield came from.
func (y Yield) From(s Sources) string {
	switch {
	case y.Ledger != nil && y.Counts != nil:
		return fmt.Sprintf("%s: %d accepted, %d rejected, %d held; corrected for the gate %s",
			y.Ledger, y.Counts.Accepted, y.Counts.Rejected, y.Counts.Held, y.Ledger.Gate)
	case y.Count != nil:
		return strings.TrimSuffix(fmt.Sprintf("%d conforming of %d; %s", y.Count.K, y.Count.N, s.Of("yield")), "; ")
	}
	return s.Of("yield")
}
