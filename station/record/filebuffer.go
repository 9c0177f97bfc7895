package record

import (
	"io"
	"os"
	"sync"
)

// fileBuffers is memory that whole files are read into, used again from folder to folder.
var fileBuffers bufferPool

type bufferPool struct{ pool sync.Pool }

func (p *bufferPool) take() []byte {
	if b, ok := p.pool.Get().(*[]byte); ok {
		return *b
	}
	return nil
}

func (p *bufferPool) give(b []byte) {
	if b != nil {
		p.pool.Put(&b)
	}
}

// readInto reads a whole file into a buffer, which grows where it is too small.
func readInto(buffer []byte, path string) ([]byte, error) {
	f, err := os.Open(path)
	if err != nil {
		return buffer, err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return buffer, err
	}
	size := int(info.Size())
	if cap(buffer) < size {
		buffer = make([]byte, size)
	}
	buffer = buffer[:size]
	_, err = io.ReadFull(f, buffer)
	return buffer, err
}
