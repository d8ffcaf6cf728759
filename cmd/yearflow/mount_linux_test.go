package main

import "syscall"

// mountSmall mounts a file system in memory that a year's results do not fit into.
func mountSmall(dir string) (unmount func() error, err error) {
	if err := syscall.Mount("tmpfs", dir, "tmpfs", 0, "size=1m"); err != nil {
		return nil, err
	}
	return func() error { return syscall.Unmount(dir, 0) }, nil
}
