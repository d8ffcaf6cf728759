package profiles

import "io"

// ahead reads a stream on a goroutine of its own, so that reading, hashing and unpacking
// go on while the lines before are taken apart. It must be stopped.
type ahead struct {
	full chan block
	free chan []byte
	quit chan struct{}
	now  block
	at   int
}

// block is a piece of the stream, or its end.
type block struct {
	bytes []byte
	err   error
}

func newAhead(r io.Reader) *ahead {
	const blocks, size = 4, 256 << 10
	a := &ahead{full: make(chan block, blocks), free: make(chan []byte, blocks+1), quit: make(chan struct{})}
	for range blocks {
		a.free <- make([]byte, size)
	}
	go func() {
		defer close(a.full)
		for {
			var buf []byte
			select {
			case buf = <-a.free:
			case <-a.quit:
				return
			}
			n, err := io.ReadFull(r, buf)
			if err == io.ErrUnexpectedEOF && n > 0 {
				// A short last block, or a packed file that is cut off: the next call tells.
				err = nil
			}
			select {
			case a.full <- block{buf[:n], err}:
			case <-a.quit:
				return
			}
			if err != nil {
				return
			}
		}
	}()
	return a
}

// Read gives the stream on.
func (a *ahead) Read(p []byte) (int, error) {
	for a.at == len(a.now.bytes) {
		if a.now.err != nil {
			return 0, a.now.err
		}
		if a.now.bytes != nil {
			a.free <- a.now.bytes[:cap(a.now.bytes)]
		}
		a.now, a.at = <-a.full, 0
		if a.now.bytes == nil {
			return 0, io.EOF
		}
	}
	n := copy(p, a.now.bytes[a.at:])
	a.at += n
	return n, nil
}

// stop ends the goroutine and waits for it.
func (a *ahead) stop() {
	close(a.quit)
	for range a.full {
	}
}
