package shape

import (
	"bufio"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"os"
	"strings"

	"github.com/google/renameio/v2"
)

// headerSize is the length of the header that this package writes, magic
// string included. The format asks for a multiple of 64.
const headerSize = 128

// WriteColumns writes columns of equal length as a float64 matrix in column
// order. The file appears whole or not at all.
func WriteColumns(path string, cols [][]float64) error {
	return writeNPY(path, "<f8", true, len(cols[0]), len(cols), func(w io.Writer) error {
		for _, c := range cols {
			if err := binary.Write(w, binary.LittleEndian, c); err != nil {
				return err
			}
		}
		return nil
	})
}

// WriteDraws writes the rows of draws of equal size as an int32 matrix, one
// row of the matrix for a draw.
func WriteDraws(path string, draws [][]int32) error {
	return writeNPY(path, "<i4", false, len(draws), len(draws[0]), func(w io.Writer) error {
		for _, d := range draws {
			if err := binary.Write(w, binary.LittleEndian, d); err != nil {
				return err
			}
		}
		return nil
	})
}

func writeNPY(path, kind string, columnOrder bool, rows, cols int, body func(io.Writer) error) error {
	f, err := renameio.NewPendingFile(path, renameio.WithPermissions(0o644))
	if err != nil {
		return fmt.Errorf("shape: %s: %w", path, err)
	}
	defer f.Cleanup()
	w := bufio.NewWriterSize(f, 1<<20)
	if _, err := w.Write(header(kind, columnOrder, rows, cols)); err != nil {
		return fmt.Errorf("shape: %s: %w", path, err)
	}
	if err := body(w); err != nil {
		return fmt.Errorf("shape: %s: %w", path, err)
	}
	if err := w.Flush(); err != nil {
		return fmt.Errorf("shape: %s: %w", path, err)
	}
	return f.CloseAtomicallyReplace()
}

// header is that of the .npy format, version 1.0.
func header(kind string, columnOrder bool, rows, cols int) []byte {
	order := "False"
	if columnOrder {
		order = "True"
	}
	text := fmt.Sprintf("{'descr': '%s', 'fortran_order': %s, 'shape': (%d, %d), }", kind, order, rows, cols)
	text += strings.Repeat(" ", headerSize-10-len(text)-1) + "\n"
	return append([]byte{0x93, 'N', 'U', 'M', 'P', 'Y', 1, 0, headerSize - 10, 0}, text...)
}

// ReadColumns reads a matrix that WriteColumns wrote.
func ReadColumns(path string, rows, cols int) ([][]float64, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("shape: %w", err)
	}
	defer f.Close()
	r := bufio.NewReaderSize(f, 1<<20)
	got := make([]byte, headerSize)
	if _, err := io.ReadFull(r, got); err != nil {
		return nil, fmt.Errorf("shape: %s: %w", path, err)
	}
	if string(got) != string(header("<f8", true, rows, cols)) {
		return nil, fmt.Errorf("shape: %s: it does not hold %d x %d columns: remove it, it is made anew", path, rows, cols)
	}
	out := make([][]float64, cols)
	buffer := make([]byte, 8*rows) // one for all columns: the peak memory of a run must be the engine's
	for j := range out {
		if _, err := io.ReadFull(r, buffer); err != nil {
			return nil, fmt.Errorf("shape: %s: column %d: %w", path, j, err)
		}
		out[j] = make([]float64, rows)
		for i := range out[j] {
			out[j][i] = math.Float64frombits(binary.LittleEndian.Uint64(buffer[8*i:]))
		}
	}
	return out, nil
}
