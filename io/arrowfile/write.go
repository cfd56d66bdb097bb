// Package arrowfile keeps tables in the two formats of Apache Arrow's
// interprocess communication (IPC): the file and the stream. All columns are
// 64-bit floats; each field carries the metadata "unit" and "about", the schema
// carries the table's record.
package arrowfile

import (
	"bufio"
	"errors"
	"fmt"
	"io"

	"rhotrace/io/table"

	"github.com/apache/arrow/go/v15/arrow"
	"github.com/apache/arrow/go/v15/arrow/array"
	"github.com/apache/arrow/go/v15/arrow/ipc"
	"github.com/apache/arrow/go/v15/arrow/memory"
)

// batchRows bounds the rows of one record batch, so that a reader need not hold
// more than half a megabyte per column at a time.
const batchRows = 1 << 16

// endOfStream ends a stream of messages, and the messages within a file (Arrow
// columnar format 1.4, "IPC Streaming Format").
var endOfStream = []byte{0xff, 0xff, 0xff, 0xff, 0, 0, 0, 0}

// Write writes the table as an Arrow IPC file.
func Write(w io.Writer, t *table.Table) error {
	out, err := NewFileWriter(w, t)
	return writeAll(out, err, t)
}

// WriteStream writes the table as an Arrow IPC stream, which a reader can take
// in while it is being written.
func WriteStream(w io.Writer, t *table.Table) error {
	out, err := NewStreamWriter(w, t)
	return writeAll(out, err, t)
}

func writeAll(out *Writer, err error, t *table.Table) error {
	if err != nil {
		return err
	}
	values := make([][]float64, len(t.Columns))
	for i, c := range t.Columns {
		values[i] = c.Values
	}
	if err := out.Append(values...); err != nil {
		return err
	}
	return out.Close()
}

// A Writer writes a table whose rows become known bit by bit, and which may be
// larger than memory. What was written is complete only after Close.
type Writer struct {
	schema *arrow.Schema
	to     *counted
	out    arrowWriter
	file   bool // not a stream
	rows   bool // there was at least one
}

// arrowWriter is what the library's writers of files and streams share.
type arrowWriter interface {
	Write(arrow.Record) error
	Close() error
}

var (
	_ arrowWriter = (*ipc.FileWriter)(nil)
	_ arrowWriter = (*ipc.Writer)(nil)
)

// NewFileWriter starts an IPC file with the columns, the metadata and the
// warnings of head; head's values are not written.
func NewFileWriter(w io.Writer, head *table.Table) (*Writer, error) {
	schema, err := schemaOf(head)
	if err != nil {
		return nil, err
	}
	to := &counted{to: bufio.NewWriter(w)}
	out, err := ipc.NewFileWriter(to, ipc.WithSchema(schema))
	if err != nil {
		return nil, fmt.Errorf("arrowfile: starting the file: %w", err)
	}
	return &Writer{schema: schema, to: to, out: out, file: true}, nil
}

// NewStreamWriter starts an IPC stream with the columns, the metadata and the
// warnings of head; head's values are not written.
func NewStreamWriter(w io.Writer, head *table.Table) (*Writer, error) {
	schema, err := schemaOf(head)
	if err != nil {
		return nil, err
	}
	to := &counted{to: bufio.NewWriter(w)}
	return &Writer{schema: schema, to: to, out: ipc.NewWriter(to, ipc.WithSchema(schema))}, nil
}

// Append writes rows, one slice for each column in head's order. Every call
// makes record batches of its own, so give it some thousand rows at a time. It
// panics if the slices are not one per column and of one length.
func (w *Writer) Append(columns ...[]float64) error {
	if len(columns) != w.schema.NumFields() {
		panic(fmt.Sprintf("arrowfile: %d slices for %d columns", len(columns), w.schema.NumFields()))
	}
	if len(columns) == 0 {
		return nil
	}
	rows := len(columns[0])
	for i, c := range columns {
		if len(c) != rows {
			panic(fmt.Sprintf("arrowfile: %d rows for column %q, %d for column %q",
				len(c), w.schema.Field(i).Name, rows, w.schema.Field(0).Name))
		}
	}
	arrays := make([]arrow.Array, len(columns))
	for from := 0; from < rows; from += batchRows {
		to := min(from+batchRows, rows)
		for i, c := range columns {
			bytes := memory.NewBufferBytes(arrow.Float64Traits.CastToBytes(c[from:to]))
			arrays[i] = array.NewFloat64Data(array.NewData(arrow.PrimitiveTypes.Float64, to-from,
				[]*memory.Buffer{nil, bytes}, nil, 0, 0))
		}
		w.rows = true
		if err := w.out.Write(array.NewRecord(w.schema, arrays, int64(to-from))); err != nil {
			return fmt.Errorf("arrowfile: writing rows: %w", err)
		}
	}
	if err := w.to.to.Flush(); err != nil {
		return fmt.Errorf("arrowfile: writing rows: %w", err)
	}
	return nil
}

// Close completes the file or stream. It does not close the writer beneath.
func (w *Writer) Close() error {
	if w.file && w.rows {
		// The library leaves out the end mark in front of the footer, which
		// readers that take a file as a stream look for. (Without rows it has
		// not yet written the head, and the mark may be absent.)
		if _, err := w.to.Write(endOfStream); err != nil {
			return fmt.Errorf("arrowfile: completing the file: %w", err)
		}
	}
	if err := w.out.Close(); err != nil {
		return fmt.Errorf("arrowfile: completing the file: %w", err)
	}
	if err := w.to.to.Flush(); err != nil {
		return fmt.Errorf("arrowfile: completing the file: %w", err)
	}
	return nil
}

// counted tells the library's file writer where it is, which is all that it
// wants from an io.WriteSeeker; so a file can go into a pipe as well.
type counted struct {
	to    *bufio.Writer
	count int64
}

func (c *counted) Write(p []byte) (int, error) {
	n, err := c.to.Write(p)
	c.count += int64(n)
	return n, err
}

func (c *counted) Seek(offset int64, whence int) (int64, error) {
	if offset != 0 || whence != io.SeekCurrent {
		return 0, errors.New("arrowfile: what was written cannot be changed")
	}
	return c.count, nil
}
