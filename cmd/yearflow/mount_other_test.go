//go:build !linux

package main

import "errors"

func mountSmall(string) (unmount func() error, err error) { return nil, errors.ErrUnsupported }
