package results

import "golang.org/x/sys/unix"

// exchangeNames swaps two folders in one indivisible act.
func exchangeNames(a, b string) error {
	return unix.Renameat2(unix.AT_FDCWD, a, unix.AT_FDCWD, b, unix.RENAME_EXCHANGE)
}
