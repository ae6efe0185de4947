package kept

import (
	"encoding/binary"
	"fmt"
	"hash/crc32"
	"io"
	"math"
	"reflect"
	"time"

	"gonum.org/v1/gonum/mat"
)

// Encode writes a value after the description of its type. A recursive type does not
// end. Errors are those of w, and of a type that cannot be kept.
func Encode(w io.Writer, value any) error {
	v := reflect.ValueOf(value)
	if !v.IsValid() {
		return fmt.Errorf("internal error: nothing to be kept")
	}
	description, err := signature(v.Type())
	if err != nil {
		return err
	}
	e := &encoder{w: w}
	e.number(uint64(crc32.Checksum([]byte(description), castagnoli)), 4)
	e.value(v)
	e.flush()
	return e.err
}

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// encodeChunk is how many bytes are gathered before they are written.
const encodeChunk = 64 << 10

// encoder writes little-endian numbers; after an error nothing more.
type encoder struct {
	w      io.Writer
	buffer []byte
	err    error
}

func (e *encoder) flush() {
	if e.err == nil && len(e.buffer) > 0 {
		_, e.err = e.w.Write(e.buffer)
	}
	e.buffer = e.buffer[:0]
}

// number writes the lowest bytes of x.
func (e *encoder) number(x uint64, bytes int) {
	e.buffer = binary.LittleEndian.AppendUint64(e.buffer, x)
	e.buffer = e.buffer[:len(e.buffer)-8+bytes]
	if len(e.buffer) >= encodeChunk {
		e.flush()
	}
}

// count writes a length; 0 stands for nil.
func (e *encoder) count(n int, isNil bool) {
	x := uint64(n) + 1
	if isNil {
		x = 0
	}
	e.buffer = binary.AppendUvarint(e.buffer, x)
}

func (e *encoder) value(v reflect.Value) {
	if e.err != nil {
		return
	}
	switch v.Type() {
	case timeType:
		text, err := v.Interface().(time.Time).MarshalBinary()
		if err != nil {
			e.err = fmt.Errorf("a time cannot be kept: %w", err)
			return
		}
		e.value(reflect.ValueOf(text))
		return
	case symmetricType:
		m := v.Interface().(mat.SymDense)
		e.value(reflect.ValueOf(symmetricOf(&m)))
		return
	}
	switch v.Kind() {
	case reflect.Bool:
		b := uint64(0)
		if v.Bool() {
			b = 1
		}
		e.number(b, 1)
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64:
		e.number(uint64(v.Int()), width(v.Kind()))
	case reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		e.number(v.Uint(), width(v.Kind()))
	case reflect.Float32:
		e.number(uint64(math.Float32bits(float32(v.Float()))), 4)
	case reflect.Float64:
		e.number(math.Float64bits(v.Float()), 8)
	case reflect.String:
		e.count(v.Len(), false)
		e.buffer = append(e.buffer, v.String()...)
	case reflect.Pointer:
		e.count(0, v.IsNil())
		if !v.IsNil() {
			e.value(v.Elem())
		}
	case reflect.Slice:
		e.count(v.Len(), v.IsNil())
		e.elements(v)
	case reflect.Array:
		e.elements(v)
	case reflect.Struct:
		for i := range v.NumField() {
			e.value(v.Field(i))
		}
	}
}

// elements writes those of a slice or an array; long ones of the usual numbers at once.
func (e *encoder) elements(v reflect.Value) {
	if v.Kind() == reflect.Slice {
		switch x := v.Interface().(type) {
		case []float32:
			for _, f := range x {
				e.number(uint64(math.Float32bits(f)), 4)
			}
			return
		case []float64:
			for _, f := range x {
				e.number(math.Float64bits(f), 8)
			}
			return
		case []int16:
			for _, i := range x {
				e.number(uint64(i), 2)
			}
			return
		case []byte:
			e.flush()
			if e.err == nil {
				_, e.err = e.w.Write(x)
			}
			return
		}
	}
	for i := range v.Len() {
		e.value(v.Index(i))
	}
}

// width is the bytes of a kind of integer, the same on every machine.
func width(k reflect.Kind) int {
	switch k {
	case reflect.Int8, reflect.Uint8:
		return 1
	case reflect.Int16, reflect.Uint16:
		return 2
	case reflect.Int32, reflect.Uint32:
		return 4
	}
	return 8
}

// symmetric is a symmetric matrix: its upper triangle, row by row.
type symmetric struct {
	N    int
	Data []float64
}

func symmetricOf(m *mat.SymDense) symmetric {
	s := symmetric{N: m.SymmetricDim()}
	for i := range s.N {
		for j := i; j < s.N; j++ {
			s.Data = append(s.Data, m.At(i, j))
		}
	}
	return s
}
