package table

import (
	"encoding/json"
	"fmt"
	"maps"
)

// Keys of the record that goes with a table.
const (
	MetaExperiment = "rhotrace.experiment" // the experiment file as it was run
	MetaVersion    = "rhotrace.version"    // version of the program
	MetaStatistics = "rhotrace.statistics" // JSON: what the run cost
	MetaWarnings   = "rhotrace.warnings"   // JSON list of strings; only in Record, never in Meta
	MetaSeed       = "rhotrace.seed"       // where random numbers were used
	MetaFile       = "rhotrace.file."      // followed by the name of a file that was read beside the experiment
)

// Record returns a copy of Meta with the warnings added as a JSON list under
// MetaWarnings: all that a file has to keep beside the columns.
func (t *Table) Record() map[string]string {
	record := make(map[string]string, len(t.Meta)+1)
	maps.Copy(record, t.Meta)
	list := t.Warnings
	if list == nil {
		list = []string{}
	}
	text, err := json.Marshal(list)
	if err != nil {
		panic("table: a list of strings is always valid JSON: " + err.Error())
	}
	record[MetaWarnings] = string(text)
	return record
}

// SetRecord is the inverse of Record: it sets Meta and Warnings. The error
// says that the warnings are no JSON list of strings.
func (t *Table) SetRecord(record map[string]string) error {
	var warnings []string
	if text, ok := record[MetaWarnings]; ok {
		if err := json.Unmarshal([]byte(text), &warnings); err != nil {
			return fmt.Errorf("table: metadata %s is not a JSON list of strings: %w", MetaWarnings, err)
		}
	}
	if len(warnings) == 0 {
		warnings = nil
	}
	meta := maps.Clone(record)
	delete(meta, MetaWarnings)
	if len(meta) == 0 {
		meta = nil
	}
	t.Meta, t.Warnings = meta, warnings
	return nil
}
