package configs

import (
	"fmt"
	"os"
	"reflect"
	"strconv"
	"strings"

	"github.com/go-viper/mapstructure/v2"
	"github.com/spf13/pflag"
	"github.com/spf13/viper"

	"lapgate/pipeline/rules"
)

// EnvPrefix starts the names of environment variables: LAPGATE_LISTEN sets listen.
const EnvPrefix = "LAPGATE"

// ServerFlags declares a flag for every setting of the server. What is given on the
// command line wins over environment and file.
func ServerFlags(flags *pflag.FlagSet) {
	defaults := reflect.ValueOf(DefaultServer())
	for _, f := range fieldsOf(defaults.Type()) {
		help := defaults.Type().FieldByIndex(f.index).Tag.Get("help")
		switch v := defaults.FieldByIndex(f.index); v.Kind() {
		case reflect.String:
			flags.String(flagName(f.key), v.String(), help)
		case reflect.Bool:
			flags.Bool(flagName(f.key), v.Bool(), help)
		case reflect.Int:
			flags.Int(flagName(f.key), int(v.Int()), help)
		case reflect.Int64:
			flags.Int64(flagName(f.key), v.Int(), help)
		}
	}
}

func flagName(key string) string { return strings.ReplaceAll(key, "_", "-") }

func envName(key string) string { return EnvPrefix + "_" + strings.ToUpper(key) }

// LoadServer returns the server's settings: the defaults, over them the file at path (none
// where path is empty), the environment, and the flags that ServerFlags declared (nil =
// none). Every value is checked, and the error says where the value came from.
func LoadServer(path string, flags *pflag.FlagSet) (Server, error) {
	settings, src := DefaultServer(), Source{}
	if path != "" {
		var err error
		if settings, src, err = LoadOver(path, settings); err != nil {
			return Server{}, err
		}
	}
	if problems := checkEnvironment(); problems != nil {
		return Server{}, problems
	}
	out, err := layered(settings, flags)
	if err != nil {
		return Server{}, err
	}
	var problems Problems
	for _, p := range out.check() {
		problems = append(problems, located(p, src, flags))
	}
	if err := problems.err(); err != nil {
		return Server{}, err
	}
	return out, nil
}

// layered puts environment and flags over what the file said.
func layered(file Server, flags *pflag.FlagSet) (Server, error) {
	v := viper.New()
	v.SetEnvPrefix(EnvPrefix)
	v.AutomaticEnv()
	from := reflect.ValueOf(file)
	for _, f := range fieldsOf(from.Type()) {
		v.SetDefault(f.key, from.FieldByIndex(f.index).Interface())
		if flags == nil {
			continue
		}
		if flag := flags.Lookup(flagName(f.key)); flag != nil {
			if err := v.BindPFlag(f.key, flag); err != nil {
				return Server{}, err
			}
		}
	}
	var out Server
	err := v.UnmarshalExact(&out, func(c *mapstructure.DecoderConfig) {
		c.TagName = "yaml"
		c.WeaklyTypedInput = false
		c.DecodeHook = mapstructure.DecodeHookFuncKind(fromText)
	})
	return out, err
}

// fromText turns the text of an environment variable into the setting's type.
func fromText(from, to reflect.Kind, value any) (any, error) {
	text, ok := value.(string)
	if !ok || from != reflect.String {
		return value, nil
	}
	switch to {
	case reflect.Int, reflect.Int64:
		return strconv.ParseInt(text, 10, 64)
	case reflect.Bool:
		return strconv.ParseBool(text)
	}
	return value, nil
}

// checkEnvironment refuses variables that cannot be read as their setting's type, and
// names that are nearly those of a setting. Other LAPGATE_ variables are left alone.
func checkEnvironment() Problems {
	var out Problems
	var names []string
	t := reflect.TypeFor[Server]()
	for _, f := range fieldsOf(t) {
		names = append(names, envName(f.key))
		text := os.Getenv(envName(f.key))
		kind := t.FieldByIndex(f.index).Type.Kind()
		if _, err := fromText(reflect.String, kind, text); err != nil && text != "" {
			want := map[reflect.Kind]string{reflect.Bool: "true or false"}[kind]
			if want == "" {
				want = "a whole number"
			}
			out = append(out, Problem{File: envName(f.key), Path: f.key, Found: fmt.Sprintf("got %q", text), Want: want})
		}
	}
	for _, pair := range os.Environ() {
		name, _, _ := strings.Cut(pair, "=")
		if near := rules.Nearest(name, names); strings.HasPrefix(name, EnvPrefix+"_") && near != "" && near != name && mistyped(name, near) {
			out = append(out, Problem{File: name, Found: "no setting has this variable", Want: near})
		}
	}
	return out.sorted()
}

// mistyped reports whether the part after the prefix is near too, so that a short name of
// another program is not taken for one of ours.
func mistyped(name, near string) bool {
	return rules.Nearest(strings.TrimPrefix(name, EnvPrefix+"_"), []string{strings.TrimPrefix(near, EnvPrefix+"_")}) != ""
}

// located says where the value of a setting came from: flag, environment or file.
func located(p Problem, src Source, flags *pflag.FlagSet) Problem {
	if flags != nil {
		if f := flags.Lookup(flagName(p.Path)); f != nil && f.Changed {
			p.File = "--" + f.Name
			return p
		}
	}
	if os.Getenv(envName(p.Path)) != "" {
		p.File = envName(p.Path)
		return p
	}
	if src.root != nil {
		return src.Problem(p.Path, p.Found, p.Want)
	}
	p.File = "settings"
	return p
}
