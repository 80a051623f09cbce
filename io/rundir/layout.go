package rundir

import (
	"fmt"
	"strconv"
	"strings"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/schema"
)

// Limits of what a run directory can hold. They are far above any real run;
// a file that says more is refused before memory is taken.
const (
	maxDraws = 1 << 20
	maxSteps = 1 << 20
	// maxRedraws is above what any way of drawing tries.
	maxRedraws = 1 << 20
)

// Keys of a block file's metadata.
const (
	keyFormat   = "holdfast.format"
	keyIdentity = "holdfast.identity"
	keyFile     = "holdfast.file"  // digest of the file, these digits taken as zeros
	keyDraws    = "holdfast.draws" // digest of the decoded draws
)

// blockSchema is the schema described in the package documentation. term and
// class are there where the run has several of them.
func (s *shape) blockSchema() *schema.GroupNode {
	coefficient := schema.FieldList{integer("step"), integer("predictor")}
	if s.terms != nil {
		coefficient = append(coefficient, integer("term"))
	}
	if s.classes > 1 {
		coefficient = append(coefficient, integer("class"))
	}
	coefficient = append(coefficient, real("coefficient"))
	return schema.MustGroup(schema.NewGroupNode("draws", parquet.Repetitions.Required, schema.FieldList{
		integer("draw"), integer("first"), integer("last"),
		text("stop"), text("why"),
		real("violation"), real("gap"),
		integer("borderline"), integer("twins"), integer("redraws"),
		listOf("entries", record(integer("step"), integer("predictor"), boolean("negative"))),
		listOf("coefficients", record(coefficient...)),
		listOf("intercepts", real("element")),
		listOf("always", real("element")),
		real("null_deviance"),
		listOf("deviance", real("element")),
		listOf("still", integer("element")),
	}, -1))
}

func integer(name string) schema.Node {
	return schema.NewInt32Node(name, parquet.Repetitions.Required, -1)
}

func real(name string) schema.Node {
	return schema.NewFloat64Node(name, parquet.Repetitions.Required, -1)
}

func boolean(name string) schema.Node {
	return schema.NewBooleanNode(name, parquet.Repetitions.Required, -1)
}

func text(name string) schema.Node {
	return schema.MustPrimitive(schema.NewPrimitiveNodeLogical(name, parquet.Repetitions.Required,
		schema.StringLogicalType{}, parquet.Types.ByteArray, -1, -1))
}

func record(fields ...schema.Node) schema.Node {
	return schema.MustGroup(schema.NewGroupNode("element", parquet.Repetitions.Required, fields, -1))
}

// listOf is the three-level list of the Parquet format, nothing in it null:
// a definition level of 0 is an empty list, 1 an element.
func listOf(name string, element schema.Node) schema.Node {
	inner := schema.MustGroup(schema.NewGroupNode("list", parquet.Repetitions.Repeated, schema.FieldList{element}, -1))
	return schema.MustGroup(schema.NewGroupNodeLogical(name, parquet.Repetitions.Required,
		schema.FieldList{inner}, schema.NewListLogicalType(), -1))
}

// blockProperties fixes all that decides the bytes: no statistics, no
// dictionaries, no compression, plain values.
func blockProperties() *parquet.WriterProperties {
	return parquet.NewWriterProperties(
		parquet.WithCreatedBy("holdfast"),
		parquet.WithVersion(parquet.V2_LATEST),
		parquet.WithDataPageVersion(parquet.DataPageV1),
		parquet.WithDictionaryDefault(false),
		parquet.WithStats(false),
		parquet.WithCompression(compress.Codecs.Uncompressed),
		parquet.WithEncoding(parquet.Encodings.Plain),
	)
}

// blockName is the file name of the block whose first draw is given.
func blockName(first int) string { return fmt.Sprintf("block-%06d.parquet", first) }

// tagLength is how much of a block's digest stands in its other name.
const tagLength = 16

// otherName is the name of a block where another one that begins with the same
// draw has the first name. It follows from what is in it.
func otherName(first int, digest string) string {
	return fmt.Sprintf("block-%06d-%s.parquet", first, digest[:tagLength])
}

// blockNumber reads a block's first draw from its file name.
func blockNumber(name string) (first int, ok bool) {
	text, ok := strings.CutPrefix(name, "block-")
	if !ok {
		return 0, false
	}
	if text, ok = strings.CutSuffix(text, ".parquet"); !ok {
		return 0, false
	}
	digits, tag, tagged := strings.Cut(text, "-")
	first, err := strconv.Atoi(digits)
	if err != nil || first < 0 {
		return 0, false
	}
	if tagged {
		return first, len(tag) == tagLength && otherName(first, tag) == name
	}
	return first, blockName(first) == name
}
