package ingest

import (
	"fmt"
	"strconv"
	"strings"
)

// Columns maps a key (f, z, phase, y, yphase, r, x, g, b, cs, cp, ls, lp, rs, rp,
// d, q, part) to a column: its number, from 1, or its header text.
type Columns map[string]string

// Units maps the same keys, part excepted, to a unit.
type Units map[string]string

// columnKeys in the order of the contract.
var columnKeys = []string{"f", "z", "phase", "y", "yphase", "r", "x", "g", "b", "cs", "cp", "ls", "lp", "rs", "rp", "d", "q", "part"}

func keyRole(key string) (role, bool) {
	for r, info := range roles {
		if info.key == key && key != "" {
			return role(r), true
		}
	}
	return roleNone, false
}

// FlagError is a flag value that cannot be used.
type FlagError struct {
	Flag, Found, Expected string
}

func (e *FlagError) Error() string {
	return fmt.Sprintf("%s: expected %s, found %q", e.Flag, e.Expected, shorten(e.Found))
}

// ParseColumns reads the text of --columns: 'f=1,z=2,phase=3'. A header text
// that holds a comma or an equals sign goes in double quotes.
func ParseColumns(text string) (Columns, error) {
	c := Columns{}
	err := parsePairs("--columns", text, func(key, value string) error {
		if n, err := strconv.Atoi(value); err == nil && n < 1 {
			return &FlagError{"--columns", key + "=" + value, "a column number from 1"}
		}
		if _, ok := c[key]; ok {
			return &FlagError{"--columns", key, "each key once"}
		}
		c[key] = value
		return nil
	})
	if err != nil {
		return nil, err
	}
	if len(c) > 0 && c["f"] == "" {
		return nil, &FlagError{"--columns", text, "a frequency column, f=NUMBER or f=HEADER"}
	}
	return c, nil
}

// ParseUnits reads the text of --units: 'f=kHz,z=mOhm,phase=rad'.
func ParseUnits(text string) (Units, error) {
	u := Units{}
	err := parsePairs("--units", text, func(key, value string) error {
		r, _ := keyRole(key)
		if r == rolePart {
			return &FlagError{"--units", key, "a key with a unit, one of " + strings.Join(columnKeys[:len(columnKeys)-1], ", ")}
		}
		if _, ok := u[key]; ok {
			return &FlagError{"--units", key, "each key once"}
		}
		if got, ok, _ := readUnit(value); !ok || !dimFits(roles[r].dim, got.dim) && !(r == roleFreq && got.dim == "rad/s") {
			return &FlagError{"--units", key + "=" + value, dimName(roles[r].dim)}
		}
		u[key] = value
		return nil
	})
	if err != nil {
		return nil, err
	}
	return u, nil
}

// parsePairs cuts 'key=value,key=value'.
func parsePairs(flag, text string, add func(key, value string) error) error {
	for rest := text; strings.TrimSpace(rest) != ""; {
		key, after, ok := strings.Cut(rest, "=")
		key = strings.ToLower(strings.TrimSpace(key))
		if !ok {
			return &FlagError{flag, rest, "KEY=VALUE, separated by commas"}
		}
		if _, known := keyRole(key); !known {
			return &FlagError{flag, key, "a key of " + strings.Join(columnKeys, ", ")}
		}
		var value string
		if after = strings.TrimLeft(after, " "); strings.HasPrefix(after, `"`) {
			end := strings.IndexByte(after[1:], '"')
			if end < 0 {
				return &FlagError{flag, after, "a closing quote"}
			}
			value, rest = after[1:1+end], strings.TrimLeft(after[end+2:], " ")
			if rest != "" && rest[0] != ',' {
				return &FlagError{flag, rest, "a comma after the quoted value"}
			}
			rest = strings.TrimPrefix(rest, ",")
		} else {
			value, rest, _ = strings.Cut(after, ",")
			value = strings.TrimSpace(value)
		}
		if value == "" {
			return &FlagError{flag, key + "=", "a value after " + key + "="}
		}
		if err := add(key, value); err != nil {
			return err
		}
	}
	return nil
}

// CheckConnection reports whether the value of --connection is one.
func CheckConnection(text string) error {
	switch text {
	case "", ConnectionReflection, ConnectionSeries, ConnectionShunt:
		return nil
	}
	return &FlagError{"--connection", text, "reflection, series or shunt"}
}
