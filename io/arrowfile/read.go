package arrowfile

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"

	"rhotrace/io/table"

	"github.com/apache/arrow/go/v15/arrow/array"
	"github.com/apache/arrow/go/v15/arrow/ipc"
	"github.com/apache/arrow/go/v15/arrow/memory"
)

// Read reads a table from an Arrow IPC file or stream, whichever it is. Every
// column must hold 64-bit floats; a null becomes NaN. A file or stream that is
// damaged or cut short gives an error, never a part of the table.
func Read(r io.Reader) (t *table.Table, err error) {
	data, err := io.ReadAll(r)
	if err != nil {
		return nil, fmt.Errorf("arrowfile: reading: %w", err)
	}
	// The library panics on some damaged input. What allocates out of all
	// proportion to the input is stopped by a panic as well.
	defer func() {
		if cause := recover(); cause != nil {
			t, err = nil, fmt.Errorf("arrowfile: the file is damaged, make it anew: %v", cause)
		}
	}()
	messages, err := messagesIn(data)
	if err != nil {
		return nil, err
	}
	in, err := ipc.NewReaderFromMessageReader(messages, ipc.WithAllocator(&bounded{left: 64<<20 + 64*len(data)}))
	if err != nil {
		return nil, fmt.Errorf("arrowfile: the file is damaged, make it anew: %w", err)
	}
	defer in.Release()
	if t, err = headOf(in.Schema()); err != nil {
		return nil, err
	}
	for in.Next() {
		for i, column := range in.Record().Columns() {
			t.Columns[i].Values = appended(t.Columns[i].Values, column.(*array.Float64))
		}
	}
	if in.Err() != nil {
		return nil, fmt.Errorf("arrowfile: the file is damaged, make it anew: %w", in.Err())
	}
	if !messages.ended {
		return nil, errors.New("arrowfile: the stream has no end mark, so it was cut short; make it anew")
	}
	return t, t.Check()
}

func appended(values []float64, column *array.Float64) []float64 {
	from := len(values)
	values = append(values, column.Float64Values()...)
	if column.NullN() > 0 {
		for i := range column.Len() {
			if column.IsNull(i) {
				values[from+i] = math.NaN()
			}
		}
	}
	return values
}

// continuation stands before the length of every message.
var continuation = endOfStream[:4]

// messages hands the library one message after the other straight from the
// bytes. The library's own reader believes the lengths in a damaged file and
// allocates gigabytes.
type messages struct {
	rest  []byte
	ended bool // the end was marked: nothing is missing
}

var _ ipc.MessageReader = (*messages)(nil)

// messagesIn finds the messages. In a file they stand between the magic word,
// padded to eight bytes, and the footer, whose length stands before the magic
// word at the end (Arrow columnar format 1.4, "IPC File Format"); a stream
// begins with the mark of a message.
func messagesIn(data []byte) (*messages, error) {
	if bytes.HasPrefix(data, continuation) {
		return &messages{rest: data}, nil
	}
	if !bytes.HasPrefix(data, ipc.Magic) {
		return nil, errors.New("arrowfile: this is neither an Arrow file nor an Arrow stream (of format 0.15 or later)")
	}
	const head = 8
	tail := 4 + len(ipc.Magic)
	if len(data) < head+tail || !bytes.HasSuffix(data, ipc.Magic) {
		return nil, errors.New("arrowfile: the Arrow file is cut short, make it anew")
	}
	footer := int64(binary.LittleEndian.Uint32(data[len(data)-tail:]))
	if footer > int64(len(data)-head-tail) {
		return nil, fmt.Errorf("arrowfile: the file is damaged, make it anew: a footer of %d bytes in a file of %d", footer, len(data))
	}
	return &messages{rest: data[head : len(data)-tail-int(footer)], ended: true}, nil
}

// Message returns the next message, io.EOF after the last.
func (m *messages) Message() (*ipc.Message, error) {
	if len(m.rest) == 0 {
		return nil, io.EOF
	}
	start, err := m.take(8)
	if err != nil {
		return nil, err
	}
	if !bytes.HasPrefix(start, continuation) {
		return nil, fmt.Errorf("arrowfile: no message where one should begin, %d bytes before the end", len(m.rest)+8)
	}
	size := binary.LittleEndian.Uint32(start[4:])
	if size == 0 {
		m.ended = true
		m.rest = nil
		return nil, io.EOF
	}
	meta, err := m.take(int64(size))
	if err != nil {
		return nil, err
	}
	empty := ipc.NewMessage(memory.NewBufferBytes(meta), memory.NewBufferBytes(nil))
	if empty.Type() == ipc.MessageSchema {
		if err := checkSchema(meta); err != nil {
			return nil, err
		}
	}
	length := empty.BodyLen()
	body, err := m.take(length)
	if err != nil {
		return nil, err
	}
	return ipc.NewMessage(memory.NewBufferBytes(meta), memory.NewBufferBytes(body)), nil
}

func (m *messages) take(n int64) ([]byte, error) {
	if n < 0 || n > int64(len(m.rest)) {
		return nil, fmt.Errorf("arrowfile: %d bytes announced, %d left", n, len(m.rest))
	}
	taken := m.rest[:n]
	m.rest = m.rest[n:]
	return taken, nil
}

// Retain and Release do nothing: the garbage collector keeps the bytes.
func (m *messages) Retain()  {}
func (m *messages) Release() {}

// bounded allocates until the bytes that a file may cost are spent. Compressed
// files need more memory than bytes, damaged ones ask for any number.
type bounded struct{ left int }

var _ memory.Allocator = (*bounded)(nil)

func (b *bounded) Allocate(size int) []byte {
	if size < 0 || size > b.left {
		panic(fmt.Sprintf("it asks for %d bytes more memory, %d are allowed for its size", size, b.left))
	}
	b.left -= size
	return memory.DefaultAllocator.Allocate(size)
}

func (b *bounded) Reallocate(size int, old []byte) []byte {
	if size <= cap(old) && size >= 0 {
		return old[:size]
	}
	grown := b.Allocate(size)
	copy(grown, old)
	b.Free(old)
	return grown
}

func (b *bounded) Free(old []byte) { b.left += len(old) }
