package command

import (
	"fmt"
	"io"
	"maps"
	"os"
	"slices"

	"github.com/alecthomas/kong"
	"github.com/pelletier/go-toml/v2"
)

// tomlResolver makes a TOML file answer for options that neither the command line nor the environment
// gives. A name no command has is an error, so that a misspelt option does not pass in silence.
func tomlResolver(r io.Reader) (kong.Resolver, error) {
	values := map[string]any{}
	if err := toml.NewDecoder(r).Decode(&values); err != nil {
		return nil, fmt.Errorf("not a TOML file: %w", err)
	}
	return resolver(values), nil
}

type resolver map[string]any

func (r resolver) Validate(app *kong.Application) error {
	known := map[string]bool{}
	_ = kong.Visit(app, func(n kong.Visitable, next kong.Next) error {
		if f, ok := n.(*kong.Flag); ok {
			known[f.Name] = true
		}
		return next(nil)
	})
	for name := range r {
		if !known[name] || name == "config" {
			return fmt.Errorf("configuration file: there is no option %q", name)
		}
	}
	return nil
}

func (r resolver) Resolve(_ *kong.Context, _ *kong.Path, flag *kong.Flag) (any, error) {
	v, ok := r[flag.Name]
	for _, env := range flag.Envs { // kong would let a resolver go before the environment
		if _, set := os.LookupEnv(env); set {
			ok = false
		}
	}
	if !ok {
		return nil, nil
	}
	switch v := v.(type) {
	case []any: // kong takes lists and tables the way the command line writes them
		parts := make([]string, len(v))
		for i, e := range v {
			parts[i] = fmt.Sprint(e)
		}
		return kong.JoinEscaped(parts, ','), nil
	case map[string]any:
		parts := make([]string, 0, len(v))
		for _, k := range slices.Sorted(maps.Keys(v)) {
			parts = append(parts, fmt.Sprintf("%s=%v", k, v[k]))
		}
		return kong.JoinEscaped(parts, ';'), nil
	default:
		return fmt.Sprint(v), nil
	}
}
