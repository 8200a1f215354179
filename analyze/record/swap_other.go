//go:build !linux

package record

import "errors"

// exchange needs a system call that only Linux is asked for.
func exchange(_, _ string) error { return errors.ErrUnsupported }
