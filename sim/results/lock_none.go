//go:build !(darwin || dragonfly || freebsd || linux || netbsd || openbsd)

package results

import "os"

func lockFolder(*os.File) {}

// inUse cannot be known here: a left-over folder stays.
func inUse(string) bool { return true }

// notSyncable: folders are not synced where the system does not offer it.
func notSyncable(error) bool { return true }
