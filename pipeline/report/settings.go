package report

import (
	"bytes"
	"encoding/json"
	"sort"
	"strings"
)

// changed names the parts of the settings in which two releases differ.
func changed(r, before *Release) string {
	var now, then map[string]json.RawMessage
	if json.Unmarshal(r.canonical, &now) != nil || json.Unmarshal(before.canonical, &then) != nil {
		return "not known"
	}
	var names []string
	for name := range now {
		if !bytes.Equal(now[name], then[name]) {
			names = append(names, name)
		}
	}
	for name := range then {
		if _, ok := now[name]; !ok {
			names = append(names, name)
		}
	}
	sort.Strings(names)
	return strings.Join(names, ", ")
}
