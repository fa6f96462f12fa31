// Command schemagen writes the JSON Schema of the Report from its Go types, so
// that the contract cannot drift from the code: field names and types come from
// the struct tags, descriptions from the comments, value lists from `enum` tags.
//
// Run it by `go generate ./reports`; a test compares its output with the
// committed reports/schema.json.
package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"os"
	"reflect"
	"sort"
	"strings"
)

func main() {
	if len(os.Args) != 3 {
		fmt.Fprintln(os.Stderr, "error: usage: schemagen report.go schema.json")
		os.Exit(1)
	}
	out, err := Generate(os.Args[1])
	if err == nil {
		err = os.WriteFile(os.Args[2], out, 0o644)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "error:", err)
		os.Exit(1)
	}
}

// Generate returns the schema of the type Report in the Go file at path.
func Generate(path string) ([]byte, error) {
	file, err := parser.ParseFile(token.NewFileSet(), path, nil, parser.ParseComments)
	if err != nil {
		return nil, err
	}
	structs := map[string]*ast.StructType{}
	docs := map[string]string{}
	for _, d := range file.Decls {
		decl, ok := d.(*ast.GenDecl)
		if !ok || decl.Tok != token.TYPE {
			continue
		}
		for _, s := range decl.Specs {
			spec := s.(*ast.TypeSpec)
			if st, ok := spec.Type.(*ast.StructType); ok {
				structs[spec.Name.Name] = st
				docs[spec.Name.Name] = oneLine(decl.Doc)
			}
		}
	}
	defs := map[string]any{}
	for name, st := range structs {
		def, err := object(st, structs)
		if err != nil {
			return nil, fmt.Errorf("type %s: %w", name, err)
		}
		def["description"] = docs[name]
		defs[name] = def
	}
	used := map[string]bool{}
	reach("Report", defs, used)
	for name := range defs {
		if !used[name] {
			delete(defs, name)
		}
	}
	schema := map[string]any{
		"$schema": "https://json-schema.org/draft/2020-12/schema",
		"title":   "kneepoint report, schema 1",
		"$ref":    "#/$defs/Report",
		"$defs":   defs,
	}
	var buf bytes.Buffer
	enc := json.NewEncoder(&buf)
	enc.SetEscapeHTML(false)
	enc.SetIndent("", " ")
	err = enc.Encode(schema)
	return buf.Bytes(), err
}

// object is the schema of one struct; embedded structs are taken in.
func object(st *ast.StructType, structs map[string]*ast.StructType) (map[string]any, error) {
	props := map[string]any{}
	required := []string{}
	for _, f := range st.Fields.List {
		if len(f.Names) == 0 {
			inner, err := object(structs[f.Type.(*ast.Ident).Name], structs)
			if err != nil {
				return nil, err
			}
			for k, v := range inner["properties"].(map[string]any) {
				props[k] = v
			}
			required = append(required, inner["required"].([]string)...)
			continue
		}
		tag := reflect.StructTag(strings.Trim(f.Tag.Value, "`"))
		name, opts, _ := strings.Cut(tag.Get("json"), ",")
		if name == "-" {
			continue
		}
		if name == "" {
			return nil, fmt.Errorf("field %s has no json name", f.Names[0].Name)
		}
		s, err := typeSchema(f.Type)
		if err != nil {
			return nil, fmt.Errorf("field %s: %w", name, err)
		}
		if e := tag.Get("enum"); e != "" {
			s["enum"] = strings.Split(e, ",")
		}
		if d := oneLine(f.Comment); d != "" {
			s["description"] = d
		} else if d := oneLine(f.Doc); d != "" {
			s["description"] = d
		}
		props[name] = s
		if !strings.Contains(opts, "omitempty") {
			required = append(required, name)
		}
	}
	sort.Strings(required)
	return map[string]any{"type": "object", "properties": props, "required": required, "additionalProperties": false}, nil
}

func typeSchema(t ast.Expr) (map[string]any, error) {
	switch t := t.(type) {
	case *ast.Ident:
		switch t.Name {
		case "string":
			return map[string]any{"type": "string"}, nil
		case "bool":
			return map[string]any{"type": "boolean"}, nil
		case "int", "int64":
			return map[string]any{"type": "integer"}, nil
		case "Number":
			return map[string]any{"type": []string{"number", "null"}}, nil
		}
		return map[string]any{"$ref": "#/$defs/" + t.Name}, nil
	case *ast.StarExpr:
		inner, err := typeSchema(t.X)
		if err != nil {
			return nil, err
		}
		return map[string]any{"anyOf": []any{inner, map[string]any{"type": "null"}}}, nil
	case *ast.ArrayType:
		inner, err := typeSchema(t.Elt)
		return map[string]any{"type": "array", "items": inner}, err
	case *ast.MapType:
		inner, err := typeSchema(t.Value)
		return map[string]any{"type": "object", "additionalProperties": inner}, err
	}
	return nil, fmt.Errorf("no schema for Go type %T", t)
}

// reach marks the definitions that name refers to, however deep.
func reach(name string, defs map[string]any, used map[string]bool) {
	if used[name] || defs[name] == nil {
		return
	}
	used[name] = true
	text, _ := json.Marshal(defs[name])
	for _, part := range strings.Split(string(text), `"#/$defs/`)[1:] {
		ref, _, _ := strings.Cut(part, `"`)
		reach(ref, defs, used)
	}
}

func oneLine(c *ast.CommentGroup) string {
	if c == nil {
		return ""
	}
	return strings.Join(strings.Fields(c.Text()), " ")
}
