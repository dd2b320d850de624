package store

import (
	"bytes"
	"reflect"
	"testing"

	"tripwell/forms"
)

// Whatever field of a date goes into the key of its sum must part two dates: a date that stays in its sum is not counted again.
func TestSameSum_IsWhatTheKeySays(t *testing.T) {
	plain := forms.DueDate{Task: "button", Due: 200, Until: 210}
	other := map[reflect.Kind]any{reflect.String: "other", reflect.Int32: 300, reflect.Int: 300, reflect.Bool: true}
	for i := range reflect.TypeFor[forms.DueDate]().NumField() {
		d := plain
		field := reflect.ValueOf(&d).Elem().Field(i)
		switch v := other[field.Kind()]; {
		case v != nil:
			field.Set(reflect.ValueOf(v).Convert(field.Type()))
		case field.Kind() == reflect.Slice:
			field.Set(reflect.MakeSlice(field.Type(), 1, 1))
		case field.Type() == reflect.TypeFor[forms.Interval]():
			d.Every = forms.Interval{Months: 3}
		default:
			t.Fatalf("the test does not know how to change %s", reflect.TypeFor[forms.DueDate]().Field(i).Name)
		}
		keys := bytes.Equal(sumKey(1, plain), sumKey(1, d))
		if d.Task == plain.Task && sameSum(&plain, &d) && !keys {
			t.Errorf("%s parts two keys and not two dates", reflect.TypeFor[forms.DueDate]().Field(i).Name)
		}
	}
}
