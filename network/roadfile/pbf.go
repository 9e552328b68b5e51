package roadfile

import (
	"errors"
	"io"
)

func isPBF(head []byte) bool { return len(head) > 6 && head[0] == 0 && head[4] == '\n' }

func (c *collector) readPBF(r io.ReadSeeker) error { return errors.New("PBF: not yet") }
