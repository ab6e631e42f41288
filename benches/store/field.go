package store

import (
	"fmt"
	"strings"

	"github.com/parquet-go/parquet-go/deprecated"
	"github.com/parquet-go/parquet-go/format"

	"soctrial/benches/scenario"
)

// field is one top-level column of a foreign file, classified by what its
// schema says and by nothing else.
type field struct {
	name     string
	leaf     int    // index among the file's leaf columns
	refused  string // why the column is no plain number or text; empty when it is one
	kind     scenario.Kind
	physical format.Type
	unsigned bool
	decimal  bool
	half     bool // half-precision numbers, kept in two bytes
	scale    int  // of a decimal: value = mantissa / 10^scale
	length   int  // of a fixed-length value, bytes
	optional bool
}

// describe says what a column holds, as messages do.
func (f *field) describe() string {
	switch {
	case f.refused != "":
		return f.refused
	case f.kind == scenario.Text:
		return "texts"
	case f.kind == scenario.Int:
		return "whole numbers"
	}
	return "numbers"
}

// newField classifies a schema element. Both annotations of a Parquet schema are
// read: the logical type, and the older converted type that some writers
// give alone.
func newField(e *format.SchemaElement, leaf int) field {
	f := field{name: e.Name, leaf: leaf, physical: e.Type.V, length: int(e.TypeLength.V)}
	repetition := e.RepetitionType.V
	f.optional = repetition == format.Optional
	switch {
	case e.NumChildren.V > 0 || !e.Type.Valid:
		f.refused = "nested values"
		return f
	case repetition == format.Repeated:
		f.refused = "lists"
		return f
	}
	f.classifyPhysical()
	converted := deprecated.ConvertedType(-1)
	if e.ConvertedType.Valid {
		converted = e.ConvertedType.V
	}
	switch lt := e.LogicalType.Value.(type) {
	case nil:
		f.annotateConverted(converted, int(e.Scale.V))
	case *format.StringType, *format.EnumType, *format.JsonType:
		f.annotate(format.ByteArray, scenario.Text)
	case *format.DecimalType:
		f.annotateDecimal(int(lt.Scale))
	case *format.IntType:
		f.unsigned = !lt.IsSigned
		if f.kind != scenario.Int {
			f.refuse(lt.String())
		}
	case *format.Float16Type:
		if f.physical != format.FixedLenByteArray || f.length != 2 {
			f.refuse("misannotated FLOAT16")
			break
		}
		f.refused, f.half, f.kind = "", true, scenario.Number
	case *format.NullType:
		// Every value is null: whatever the column is for, its default stands.
	default:
		f.refuse(lt.String())
	}
	return f
}

func (f *field) classifyPhysical() {
	switch f.physical {
	case format.Int32, format.Int64:
		f.kind = scenario.Int
	case format.Float, format.Double:
		f.kind = scenario.Number
	case format.ByteArray:
		f.kind = scenario.Text
	case format.Boolean:
		f.refused = "truth values"
	case format.Int96:
		f.refused = "INT96 time stamps"
	case format.FixedLenByteArray:
		f.refused = "bytes"
	default:
		f.refused = fmt.Sprintf("values of the unknown type %d", int(f.physical))
	}
}

// refuse marks the column as one of values of an annotated type.
func (f *field) refuse(annotation string) {
	f.refused = strings.TrimSpace(annotation + " values")
}

// annotate checks that an annotation stands on the physical type it belongs to.
func (f *field) annotate(physical format.Type, kind scenario.Kind) {
	if f.physical != physical {
		f.refuse(fmt.Sprintf("misannotated %s", f.physical))
		return
	}
	f.kind = kind
}

func (f *field) annotateDecimal(scale int) {
	switch f.physical {
	case format.Int32, format.Int64, format.ByteArray, format.FixedLenByteArray:
	default:
		f.refuse("misannotated decimal")
		return
	}
	// 38 digits are the most that Parquet writers and databases keep.
	if scale < 0 || scale > 38 || f.physical == format.FixedLenByteArray && (f.length < 1 || f.length > 32) {
		f.refuse(fmt.Sprintf("decimal with scale %d", scale))
		return
	}
	f.refused, f.decimal, f.scale, f.kind = "", true, scale, scenario.Number
	if scale == 0 {
		f.kind = scenario.Int
	}
}

func (f *field) annotateConverted(c deprecated.ConvertedType, scale int) {
	switch c {
	case -1:
	case deprecated.UTF8, deprecated.Enum, deprecated.Json:
		f.annotate(format.ByteArray, scenario.Text)
	case deprecated.Decimal:
		f.annotateDecimal(scale)
	case deprecated.Uint8, deprecated.Uint16, deprecated.Uint32, deprecated.Uint64:
		f.unsigned = true
	case deprecated.Int8, deprecated.Int16, deprecated.Int32, deprecated.Int64:
	default:
		f.refuse(convertedNames[c])
	}
}

// convertedNames of the types that are refused; a map, a list or a number
// beyond the known ones has no name.
var convertedNames = map[deprecated.ConvertedType]string{
	deprecated.Date: "DATE", deprecated.TimeMillis: "TIME", deprecated.TimeMicros: "TIME",
	deprecated.TimestampMillis: "TIMESTAMP", deprecated.TimestampMicros: "TIMESTAMP",
	deprecated.Bson: "BSON", deprecated.Interval: "INTERVAL", deprecated.Map: "map", deprecated.List: "list",
}
