//go:build !linux

package results

import "errors"

func exchangeNames(a, b string) error { return errors.ErrUnsupported }
