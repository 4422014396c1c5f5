package house

import (
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path"
	"strings"
	"testing"
)

// A package opens with one comment that tells what it promises; two would be joined in an order nobody chose.
func TestOnePackageCommentEach(t *testing.T) {
	packages, comments := map[string]bool{}, map[string][]string{}
	for name, f := range files(t) {
		if strings.HasSuffix(name, "_test.go") {
			continue
		}
		dir := path.Dir(name)
		packages[dir] = true
		if f.Doc != nil && !ast.IsGenerated(f) {
			comments[dir] = append(comments[dir], name)
		}
	}
	for dir := range packages {
		if in := comments[dir]; len(in) != 1 {
			t.Errorf("%s has %d package comments, not one: %s", dir, len(in), strings.Join(in, ", "))
		}
	}
}

// forbidden are the calls that no test may make, each with what to do instead.
var forbidden = map[string]string{
	"time.Sleep": "wait for a signal: a channel, an answer, a row",
	"t.Skip":     "a test that does not run proves nothing; make its needs, or fail and say what to install",
	"t.SkipNow":  "a test that does not run proves nothing; make its needs, or fail and say what to install",
	"t.Skipf":    "a test that does not run proves nothing; make its needs, or fail and say what to install",
}

func TestNoTestSleepsOrSkips(t *testing.T) {
	for name, f := range files(t) {
		helper := strings.HasPrefix(name, "internal/pgtest/") || strings.HasPrefix(name, "ledger/ledgertest/")
		if !strings.HasSuffix(name, "_test.go") && !helper {
			continue
		}
		ast.Inspect(f, func(n ast.Node) bool {
			call, ok := n.(*ast.CallExpr)
			if !ok {
				return true
			}
			if instead, bad := forbidden[called(call)]; bad {
				t.Errorf("%s calls %s: %s", name, called(call), instead)
			}
			return true
		})
	}
}

// called is "receiver.Name" of a call; every test's, benchmark's and fuzz target's receiver counts as t.
func called(call *ast.CallExpr) string {
	sel, ok := call.Fun.(*ast.SelectorExpr)
	if !ok {
		return ""
	}
	x, ok := sel.X.(*ast.Ident)
	if !ok {
		return ""
	}
	switch x.Name {
	case "b", "f", "tb":
		return "t." + sel.Sel.Name
	}
	return x.Name + "." + sel.Sel.Name
}

// files parses every Go file of the module by its path in it.
func files(t *testing.T) map[string]*ast.File {
	t.Helper()
	all := map[string]*ast.File{}
	root := os.DirFS("../..")
	err := fs.WalkDir(root, ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && (d.Name() == "testdata" || name != "." && strings.HasPrefix(d.Name(), ".")) {
			return fs.SkipDir
		}
		if !strings.HasSuffix(name, ".go") {
			return nil
		}
		src, err := fs.ReadFile(root, name)
		if err != nil {
			return err
		}
		f, err := parser.ParseFile(token.NewFileSet(), name, src, parser.ParseComments|parser.SkipObjectResolution)
		all[name] = f
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return all
}
