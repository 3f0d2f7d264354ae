package reader

import (
	"context"
	"errors"
)

func isSTDF(b []byte) bool                    { return len(b) > 5 && b[2] == 0 && b[3] == 10 }
func (j *job) readSTDF(context.Context) error { return errors.New("not built yet") }
