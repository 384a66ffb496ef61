package acquire

import (
	"context"
	"time"
)

// chunk is what one Read gave, or the error that ended reading.
type chunk struct {
	data []byte
	at   time.Time
	err  error
	free chan []byte
}

// release gives the buffer back to the reader.
func (c chunk) release() {
	select {
	case c.free <- c.data[:cap(c.data)]:
	default:
	}
}

const (
	chunkSize  = 512
	chunkQueue = 64 // chunks that wait while a weight is made durable
)

// readChunks reads until the line ends and stamps each chunk with its arrival. The
// channel is closed when the reader has returned; both results are that channel.
func readChunks(ctx context.Context, conn Conn) (chunks, done <-chan chunk) {
	out := make(chan chunk, chunkQueue)
	free := make(chan []byte, chunkQueue)
	go func() {
		defer close(out)
		for {
			buf := take(free)
			n, err := conn.Read(buf)
			if n == 0 && err == nil {
				chunk{data: buf, free: free}.release()
				if ctx.Err() != nil {
					return
				}
				continue
			}
			select {
			case out <- chunk{data: buf[:n], at: time.Now(), err: err, free: free}:
			case <-ctx.Done():
				return
			}
			if err != nil {
				return
			}
		}
	}()
	return out, out
}

// take gives a used buffer or a new one.
func take(free chan []byte) []byte {
	select {
	case b := <-free:
		return b
	default:
		return make([]byte, chunkSize)
	}
}
