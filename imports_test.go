package rhotrace

import (
	"go/parser"
	"go/token"
	"io/fs"
	"path"
	"strconv"
	"strings"
	"testing"

	"os"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// allowed lists which folders a folder may import. It is the data path read
// backwards; DEVELOPERS.md shows it as a picture.
var allowed = map[string]string{
	"":                "",
	"ode":             "",
	"ode/odetest":     "",
	"lindblad":        "ode",
	"models":          "ode lindblad models/angular models/species",
	"models/angular":  "",
	"models/species":  "models/angular io/quantity",
	"io/spelling":     "",
	"io/quantity":     "io/spelling",
	"io/table":        "io/quantity",
	"io/tracefile":    "io/spelling io/quantity io/table",
	"io/arrowfile":    "io/quantity io/table",
	"io/figure":       "io/quantity io/table",
	"io/report":       "io/quantity io/table",
	"experiment":      "ode lindblad models models/angular models/species io/spelling io/quantity io/table io/tracefile",
	"fit":             "ode lindblad models experiment io/quantity io/table io/tracefile",
	"validation":      "ode lindblad models models/angular models/species experiment fit io/quantity io/table io/tracefile",
	"cmd/rhotrace":    "*",
	"cmd/rhotrace/..": "*",
}

// fenced lists the folders that may import a heavy dependency.
var fenced = map[string]string{
	"github.com/apache/arrow/": "io/arrowfile",
	"gonum.org/v1/plot":        "io/figure",
	"github.com/pelletier/":    "experiment",
	"github.com/urfave/cli/":   "cmd/rhotrace",
	"golang.org/x/term":        "cmd/rhotrace",
}

// The imports are parsed here and not asked of the go command, so that the
// cache of test results sees a new one.
func TestImports(t *testing.T) {
	files := 0
	err := fs.WalkDir(os.DirFS("."), ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() {
			switch base := path.Base(name); {
			case base == "testdata" || strings.HasPrefix(base, ".") && name != ".":
				return fs.SkipDir
			case base == "util" || base == "common" || base == "helpers" || base == "pkg":
				t.Errorf("%s: a folder is named after what it holds", name)
			}
			return nil
		}
		if !strings.HasSuffix(name, ".go") {
			return nil
		}
		files++
		check(t, name)
		return nil
	})
	require.NoError(t, err)
	assert.Greater(t, files, 50)
}

func check(t *testing.T, name string) {
	file, err := parser.ParseFile(token.NewFileSet(), name, nil, parser.ImportsOnly)
	require.NoError(t, err)
	folder := path.Dir(name)
	if folder == "." {
		folder = ""
	}
	assert.NotEqual(t, "io", folder, "%s: io has no Go files of its own", name)
	key := folder
	if strings.HasPrefix(folder, "cmd/rhotrace/") {
		key = "cmd/rhotrace/.."
	}
	list, known := allowed[key]
	assert.True(t, known, "%s: the folder is not in the import table of imports_test.go", name)
	above := strings.HasSuffix(file.Name.Name, "_test")
	for _, im := range file.Imports {
		what, err := strconv.Unquote(im.Path.Value)
		require.NoError(t, err)
		for heavy, home := range fenced {
			if strings.HasPrefix(what, heavy) {
				assert.True(t, folder == home || strings.HasPrefix(folder, home+"/"), "%s imports %s, which belongs in %s only", name, what, home)
			}
		}
		inside, ours := strings.CutPrefix(what, "rhotrace/")
		if !ours || above || list == "*" || strings.HasSuffix(name, "_test.go") && inside == "ode/odetest" {
			continue
		}
		ok := strings.HasPrefix(inside, folder+"/") && folder != ""
		for _, a := range strings.Fields(list) {
			ok = ok || a == inside
		}
		assert.True(t, ok, "%s imports %s, which is not below %s in the import table", name, inside, folder)
	}
}
