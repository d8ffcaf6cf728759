//go:build !linux

package results

import (
	"errors"
	"os"
)

func exchangeNames(a, b string) error { return errors.ErrUnsupported }

func lockFolder(*os.File) {}

// inUse cannot be known here: a left-over folder stays.
func inUse(string) bool { return true }

// notSyncable: folders are not synced where the system does not offer it.
func notSyncable(error) bool { return true }
