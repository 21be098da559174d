package writers

import (
	"bytes"
	"encoding/base64"
	"errors"
	"fmt"

	"github.com/apache/arrow-go/v18/arrow"
	"github.com/apache/arrow-go/v18/arrow/ipc"
	"github.com/apache/arrow-go/v18/arrow/memory"
	flatbuffers "github.com/google/flatbuffers/go"

	"catenrich/internal/parquetfoot"
)

// maxArrowFields bounds the fields of an Arrow schema, those within others
// included. Flatbuffers may share parts, so a few hundred bytes can spell a
// schema of any size.
const maxArrowFields = 1 << 18

// arrowSchema extends the Arrow schema that Arrow's writers leave: an IPC
// message in base64, from which their readers take types and dictionaries.
func arrowSchema(value string, k *newKeys) (string, error) {
	raw, err := base64.StdEncoding.DecodeString(value)
	if err != nil {
		return "", err
	}
	old, err := readArrowSchema(raw)
	if err != nil {
		return "", err
	}
	if old.NumFields() != k.top {
		return "", fmt.Errorf("it describes %d columns and there are %d", old.NumFields(), k.top)
	}
	types := map[parquetfoot.Physical]arrow.DataType{parquetfoot.Double: arrow.PrimitiveTypes.Float64, parquetfoot.Float: arrow.PrimitiveTypes.Float32,
		parquetfoot.Int32: arrow.PrimitiveTypes.Int32, parquetfoot.Boolean: arrow.FixedWidthTypes.Boolean}
	fields := old.Fields()
	for i := range k.columns {
		fields = append(fields, arrow.Field{Name: k.columns[i].name, Type: types[k.columns[i].physical], Nullable: true})
	}
	metadata := old.Metadata()
	extended := arrow.NewSchemaWithEndian(fields, &metadata, old.Endianness())
	payload := ipc.GetSchemaPayload(extended, memory.NewGoAllocator())
	defer payload.Release()
	var out bytes.Buffer
	if _, err := payload.WritePayload(&out); err != nil {
		return "", err
	}
	again, err := readArrowSchema(out.Bytes())
	if err != nil {
		return "", err
	}
	if !again.Equal(extended) || !again.Metadata().Equal(metadata) {
		return "", errors.New("it has what this program cannot write back")
	}
	return base64.StdEncoding.EncodeToString(out.Bytes()), nil
}

// readArrowSchema reads the schema at the start of an IPC stream.
func readArrowSchema(raw []byte) (*arrow.Schema, error) {
	message := raw
	if bytes.HasPrefix(raw, []byte{0xff, 0xff, 0xff, 0xff}) {
		message = raw[4:]
	}
	if len(message) < 8 || int64(flatbuffers.GetUint32(message)) > int64(len(message)-4) {
		return nil, errors.New("it is cut short")
	}
	if n := countArrowFields(message[4:]); n > maxArrowFields {
		return nil, fmt.Errorf("it has more than %d fields", maxArrowFields)
	}
	r, err := ipc.NewReader(bytes.NewReader(raw))
	if err != nil {
		return nil, err
	}
	defer r.Release()
	return r.Schema(), nil
}

// Slots of the tables of Message.fbs and Schema.fbs in apache/arrow.
const (
	messageHeader = 8
	schemaFields  = 6
	fieldChildren = 14
)

// countArrowFields counts the fields of a schema message, up to one more than
// the maximum.
func countArrowFields(message []byte) int {
	root := flatbuffers.Table{Bytes: message, Pos: flatbuffers.GetUOffsetT(message)}
	at := root.Offset(messageHeader)
	if at == 0 {
		return 0
	}
	var schema flatbuffers.Table
	root.Union(&schema, flatbuffers.UOffsetT(at))
	return countTables(&schema, schemaFields, 0)
}

func countTables(t *flatbuffers.Table, slot flatbuffers.VOffsetT, count int) int {
	at := flatbuffers.UOffsetT(t.Offset(slot))
	if at == 0 {
		return count
	}
	start, n := t.Vector(at), t.VectorLen(at)
	for i := 0; i < n && count <= maxArrowFields; i++ {
		child := flatbuffers.Table{Bytes: t.Bytes, Pos: t.Indirect(start + flatbuffers.UOffsetT(4*i))}
		count = countTables(&child, fieldChildren, count+1)
	}
	return count
}
