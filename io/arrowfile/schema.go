package arrowfile

import (
	"fmt"
	"unicode/utf8"

	"rhotrace/io/table"

	"github.com/apache/arrow/go/v15/arrow"
)

// Keys of a field's metadata.
const (
	unitKey  = "unit"
	aboutKey = "about"
)

// schemaOf describes the table. Arrow's texts are UTF-8, so an error names the
// text that is not.
func schemaOf(t *table.Table) (*arrow.Schema, error) {
	if err := t.Check(); err != nil {
		return nil, err
	}
	fields := make([]arrow.Field, len(t.Columns))
	for i, c := range t.Columns {
		for what, text := range map[string]string{"name": c.Name, unitKey: c.Unit, aboutKey: c.About} {
			if !utf8.ValidString(text) {
				return nil, fmt.Errorf("arrowfile: column %q: its %s %q is not UTF-8 text", c.Name, what, text)
			}
		}
		fields[i] = arrow.Field{
			Name:     c.Name,
			Type:     arrow.PrimitiveTypes.Float64,
			Metadata: arrow.NewMetadata([]string{unitKey, aboutKey}, []string{c.Unit, c.About}),
		}
	}
	record := t.Record()
	for key, text := range record {
		if !utf8.ValidString(key) || !utf8.ValidString(text) {
			return nil, fmt.Errorf("arrowfile: metadata %q is not UTF-8 text; save its file in UTF-8", key)
		}
	}
	metadata := arrow.MetadataFrom(record) // sorted by key
	return arrow.NewSchema(fields, &metadata), nil
}

// headOf is the inverse of schemaOf.
func headOf(schema *arrow.Schema) (*table.Table, error) {
	t := &table.Table{Columns: make([]table.Column, schema.NumFields())}
	for i, field := range schema.Fields() {
		if field.Type.ID() != arrow.FLOAT64 {
			return nil, fmt.Errorf("arrowfile: column %q holds %s; only 64-bit floats can be read", field.Name, field.Type)
		}
		unit, _ := field.Metadata.GetValue(unitKey)
		about, _ := field.Metadata.GetValue(aboutKey)
		t.Columns[i] = table.Column{Name: field.Name, Unit: unit, About: about}
	}
	metadata := schema.Metadata()
	if err := t.SetRecord(metadata.ToMap()); err != nil {
		return nil, err
	}
	return t, t.Check()
}
