package syntax

import "reflect"

// Walk calls visit for a node and, if that returns true, for the nodes in it, in the order of the text. A node is a pointer: *Rail, *Ident,
// *Number, *Modifier ...
func Walk(n Node, visit func(Node) bool) {
	if v := reflect.ValueOf(n); v.Kind() == reflect.Pointer && !v.IsNil() && visit(n) {
		walkFields(v.Elem(), visit)
	}
}

// walkFields walks the nodes in the fields of a struct. What a node embeds is part of it.
func walkFields(v reflect.Value, visit func(Node) bool) {
	for i := range v.NumField() {
		if v.Type().Field(i).Anonymous {
			if _, span := v.Field(i).Interface().(Span); !span {
				walkFields(v.Field(i), visit)
			}
			continue
		}
		walkValue(v.Field(i), visit)
	}
}

func walkValue(v reflect.Value, visit func(Node) bool) {
	switch v.Kind() {
	case reflect.Slice:
		for i := range v.Len() {
			walkValue(v.Index(i), visit)
		}
	case reflect.Interface, reflect.Pointer:
		if n, ok := v.Interface().(Node); ok && !v.IsNil() {
			Walk(n, visit)
		}
	case reflect.Struct:
		if n, ok := v.Addr().Interface().(Node); ok {
			Walk(n, visit)
		}
	}
}
