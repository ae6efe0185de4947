package kept

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"io"
	"math"
	"reflect"
	"time"

	"gonum.org/v1/gonum/mat"
)

// ErrUnfit marks bytes that are no value of the type asked for: damaged, or of another
// version.
var ErrUnfit = errors.New("it does not hold what this version keeps")

// Decoder reads values one after the other.
type Decoder struct {
	r    io.Reader
	left int64
	err  error
	tiny [8]byte
}

// NewDecoder reads from the next size bytes of r, which should be buffered.
func NewDecoder(r io.Reader, size int64) *Decoder { return &Decoder{r: r, left: size} }

// Decode reads the next value into what target points to, whose content is of no use
// after an error (ErrUnfit, or that of the reader). It takes memory for what is there, not for
// what the bytes promise.
func (d *Decoder) Decode(target any) error {
	p := reflect.ValueOf(target)
	if p.Kind() != reflect.Pointer || p.IsNil() {
		return errors.New("internal error: a value is to be read into no pointer")
	}
	description, err := signature(p.Type().Elem())
	if err != nil {
		return err
	}
	if d.number(4) != uint64(crc32.Checksum([]byte(description), castagnoli)) {
		d.unfit("another type")
	}
	d.value(p.Elem())
	return d.err
}

// Ended tells whether all bytes were read.
func (d *Decoder) Ended() bool { return d.err == nil && d.left == 0 }

func (d *Decoder) unfit(why string) {
	if d.err == nil {
		d.err = fmt.Errorf("%w (%s)", ErrUnfit, why)
	}
}

// read fills p; zeros after an error.
func (d *Decoder) read(p []byte) {
	if d.err == nil && int64(len(p)) > d.left {
		d.unfit("too short")
	}
	if d.err == nil {
		_, d.err = io.ReadFull(d.r, p)
		d.left -= int64(len(p))
	}
	if d.err != nil {
		clear(p)
	}
}

func (d *Decoder) number(bytes int) uint64 {
	d.tiny = [8]byte{}
	d.read(d.tiny[:bytes])
	return binary.LittleEndian.Uint64(d.tiny[:])
}

// count reads a length of elements of at least so many bytes each.
func (d *Decoder) count(least int) (n int, isNil bool) {
	x := uint64(0)
	for shift := 0; ; shift += 7 {
		b := d.number(1)
		if shift > 56 {
			d.unfit("a length")
			return 0, true
		}
		x |= b & 0x7f << shift
		if b < 0x80 {
			break
		}
	}
	if d.err != nil || x == 0 {
		return 0, true
	}
	if x-1 > uint64(d.left)/uint64(max(1, least)) {
		d.unfit("a length")
		return 0, true
	}
	return int(x - 1), false
}

func (d *Decoder) value(v reflect.Value) {
	if d.err != nil {
		return
	}
	switch v.Type() {
	case timeType:
		var text []byte
		var t time.Time
		d.value(reflect.ValueOf(&text).Elem())
		if d.err == nil && t.UnmarshalBinary(text) != nil {
			d.unfit("a time")
		}
		v.Set(reflect.ValueOf(t))
		return
	case symmetricType:
		d.symmetric(v.Addr().Interface().(*mat.SymDense))
		return
	}
	switch k := v.Kind(); k {
	case reflect.Bool:
		v.SetBool(d.number(1) != 0)
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64:
		shift := 64 - 8*width(k)
		v.SetInt(int64(d.number(width(k))) << shift >> shift)
	case reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		v.SetUint(d.number(width(k)))
	case reflect.Float32:
		v.SetFloat(float64(math.Float32frombits(uint32(d.number(4)))))
	case reflect.Float64:
		v.SetFloat(math.Float64frombits(d.number(8)))
	case reflect.String:
		n, _ := d.count(1)
		text := make([]byte, n)
		d.read(text)
		v.SetString(string(text))
	case reflect.Pointer:
		v.SetZero()
		if _, isNil := d.count(1); !isNil {
			v.Set(reflect.New(v.Type().Elem()))
			d.value(v.Elem())
		}
	case reflect.Slice:
		d.slice(v)
	case reflect.Array:
		for i := range v.Len() {
			d.value(v.Index(i))
		}
	case reflect.Struct:
		for i := range v.NumField() {
			d.value(v.Field(i))
		}
	}
}

func (d *Decoder) slice(v reflect.Value) {
	v.SetZero()
	n, isNil := d.count(leastBytes(v.Type().Elem()))
	if isNil {
		return
	}
	v.Set(reflect.MakeSlice(v.Type(), n, n))
	if b, ok := v.Interface().([]byte); ok {
		d.read(b)
		return
	}
	switch x := v.Interface().(type) {
	case []float32:
		d.numbers(n, 4, func(i int, p []byte) { x[i] = math.Float32frombits(binary.LittleEndian.Uint32(p)) })
	case []float64:
		d.numbers(n, 8, func(i int, p []byte) { x[i] = math.Float64frombits(binary.LittleEndian.Uint64(p)) })
	case []int16:
		d.numbers(n, 2, func(i int, p []byte) { x[i] = int16(binary.LittleEndian.Uint16(p)) })
	default:
		for i := range n {
			d.value(v.Index(i))
		}
	}
}

// numbers reads n numbers of so many bytes, some at once.
func (d *Decoder) numbers(n, bytes int, set func(i int, p []byte)) {
	var chunk [4096]byte
	for from := 0; from < n && d.err == nil; {
		some := min(n-from, len(chunk)/bytes)
		d.read(chunk[:some*bytes])
		for i := range some {
			set(from+i, chunk[i*bytes:])
		}
		from += some
	}
}

// leastBytes is how many bytes a value of a type takes at least, so that a length can be
// judged before memory is taken for it. Elements that take memory but hardly bytes, as empty
// structs and structs of slices do, are counted by their fields.
func leastBytes(t reflect.Type) int {
	if t == timeType || t == symmetricType {
		return 1
	}
	switch t.Kind() {
	case reflect.Float32:
		return 4
	case reflect.Float64:
		return 8
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64,
		reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		return width(t.Kind())
	case reflect.Array:
		return t.Len() * leastBytes(t.Elem())
	case reflect.Struct:
		sum := 0
		for i := range t.NumField() {
			sum += leastBytes(t.Field(i).Type)
		}
		return sum
	}
	return 1
}

func (d *Decoder) symmetric(m *mat.SymDense) {
	var s symmetric
	d.value(reflect.ValueOf(&s).Elem())
	if d.err != nil {
		return
	}
	if n := int64(s.N); n < 0 || n > math.MaxInt32 || n*(n+1)/2 != int64(len(s.Data)) {
		d.unfit("a matrix")
		return
	}
	if s.N == 0 {
		*m = mat.SymDense{}
		return
	}
	*m = *mat.NewSymDense(s.N, nil)
	at := 0
	for i := range s.N {
		for j := i; j < s.N; j++ {
			m.SetSym(i, j, s.Data[at])
			at++
		}
	}
}
