package api

import (
	"bytes"
	"encoding/json"
	"reflect"
)

// checkPatch tells every fault of a merge patch of a T that can be seen without the row it is for.
func checkPatch[T any](data []byte) error {
	if err := syntax(data); err != nil {
		return err
	}
	return inspect(data, shapeOf(reflect.TypeFor[T]()), true)
}

// patch applies a JSON merge patch (RFC 7396), which checkPatch found good, to current and reads the result as strictly
// as decodeJSON does. A null removes the member, which reads as absent.
func patch[T any](current T, data []byte) (T, error) {
	var none T
	target, err := json.Marshal(current)
	if err != nil {
		return none, err
	}
	merged, err := mergePatch(target, data)
	if err != nil {
		return none, err
	}
	return decodeJSON[T](merged)
}

// mergePatch is the algorithm of RFC 7396 section 2 on two JSON texts. Numbers keep the digits they were written with.
func mergePatch(target, patch []byte) ([]byte, error) {
	t, err := tree(target)
	if err != nil {
		return nil, err
	}
	p, err := tree(patch)
	if err != nil {
		return nil, err
	}
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	err = enc.Encode(merge(t, p))
	return bytes.TrimSuffix(b.Bytes(), []byte("\n")), err
}

func tree(data []byte) (any, error) {
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.UseNumber()
	var v any
	if err := dec.Decode(&v); err != nil {
		return nil, refuse(malformed, "the body is not JSON")
	}
	return v, nil
}

func merge(target, patch any) any {
	p, ok := patch.(map[string]any)
	if !ok {
		return patch
	}
	t, ok := target.(map[string]any)
	if !ok {
		t = map[string]any{}
	}
	for name, v := range p {
		if v == nil {
			delete(t, name)
		} else {
			t[name] = merge(t[name], v)
		}
	}
	return t
}
