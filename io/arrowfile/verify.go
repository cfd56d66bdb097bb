package arrowfile

import (
	"encoding/binary"
	"errors"
	"fmt"
)

// checkSchema looks through the message that holds the schema, before the
// library reads it: the library believes the lengths in it, and a single bit in
// the wrong place then costs more memory than there is. Nested columns, whose
// reading could take exponentially long, are refused here. Reading beyond the
// message panics.
//
// Tables, vectors and slots are those of FlatBuffers; numbers of the slots come
// from the order of the members in the format's Message.fbs and Schema.fbs.
func checkSchema(message []byte) error {
	const header, fields, schemaMetadata = 2, 1, 2
	const dictionary, children, fieldMetadata, name, kind = 4, 5, 6, 0, 3
	f := &flat{data: message, left: 16 * len(message)}
	schema, ok := f.member(f.follow(0), header)
	if !ok {
		return errors.New("a message without content")
	}
	schema = f.follow(schema)
	if err := f.metadata(schema, schemaMetadata); err != nil {
		return err
	}
	return f.each(schema, fields, func(field int) error {
		if err := f.text(field, name); err != nil {
			return err
		}
		nested := false
		if err := f.each(field, children, func(int) error { nested = true; return nil }); err != nil {
			return err
		}
		if _, encoded := f.member(field, dictionary); encoded || nested {
			return errors.New("it has a column of lists or of texts; only 64-bit floats can be read")
		}
		if _, typed := f.member(field, kind); !typed {
			return errors.New("a column without a type")
		}
		return f.metadata(field, fieldMetadata)
	})
}

// flat reads a FlatBuffer.
type flat struct {
	data []byte
	left int // what the texts and vectors may take together
}

func (f *flat) u32(at int) int { return int(binary.LittleEndian.Uint32(f.data[at:])) }
func (f *flat) u16(at int) int { return int(binary.LittleEndian.Uint16(f.data[at:])) }

// follow returns where the offset that stands at that place leads.
func (f *flat) follow(at int) int { return at + f.u32(at) }

// member returns where a member of a table stands, false if it is left out.
func (f *flat) member(table, slot int) (int, bool) {
	slots := table - int(int32(f.u32(table)))
	if 4+2*slot+2 > f.u16(slots) {
		return 0, false
	}
	offset := f.u16(slots + 4 + 2*slot)
	return table + offset, offset != 0
}

func (f *flat) spend(n int) error {
	if f.left -= n; n > len(f.data) || f.left < 0 {
		return fmt.Errorf("texts and lists of %d bytes and more in a message of %d", n, len(f.data))
	}
	return nil
}

// each calls do for every table of a vector of tables.
func (f *flat) each(table, slot int, do func(table int) error) error {
	at, ok := f.member(table, slot)
	if !ok {
		return nil
	}
	at = f.follow(at)
	count := f.u32(at)
	if err := f.spend(4 * count); err != nil {
		return err
	}
	for i := range count {
		if err := do(f.follow(at + 4 + 4*i)); err != nil {
			return err
		}
	}
	return nil
}

func (f *flat) text(table, slot int) error {
	at, ok := f.member(table, slot)
	if !ok {
		return nil
	}
	return f.spend(f.u32(f.follow(at)))
}

// metadata checks a vector of pairs of texts.
func (f *flat) metadata(table, slot int) error {
	return f.each(table, slot, func(pair int) error {
		return errors.Join(f.text(pair, 0), f.text(pair, 1))
	})
}
