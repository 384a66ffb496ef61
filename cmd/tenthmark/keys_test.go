package main

import (
	"reflect"
	"strings"
)

// tomlKeys lists the keys of a configuration type.
func tomlKeys(v any) []string {
	var keys []string
	collectKeys(reflect.TypeOf(v), &keys)
	return keys
}

func collectKeys(t reflect.Type, keys *[]string) {
	for i := range t.NumField() {
		f := t.Field(i)
		name, _, _ := strings.Cut(f.Tag.Get("toml"), ",")
		if name == "" || name == "-" {
			continue
		}
		inner := f.Type
		for inner.Kind() == reflect.Slice || inner.Kind() == reflect.Pointer {
			inner = inner.Elem()
		}
		if inner.Kind() == reflect.Struct && inner.Name() != "Number" {
			collectKeys(inner, keys)
			continue
		}
		*keys = append(*keys, name)
	}
}
