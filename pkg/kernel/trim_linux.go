package kernel

import (
	"bufio"
	"fmt"
	"os"
	"strconv"
	"strings"
	"syscall"
)

// ReleaseProgramPages unmaps the pages of the program's code that starting has touched: setting up the symbol tables
// of some 200 packages runs code that is not needed again. The pages stay in the system's file cache and come back one
// by one when they are used. Only code is let go: it is as it stands in the file, while data that can't be written now
// may have been written by the dynamic linker.
func ReleaseProgramPages() error {
	exe, err := os.Readlink("/proc/self/exe")
	if err != nil {
		return err
	}
	f, err := os.Open("/proc/self/maps")
	if err != nil {
		return err
	}
	defer f.Close()
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		// address permissions offset device inode path; see proc(5)
		fields := strings.Fields(lines.Text())
		if len(fields) < 6 || fields[5] != exe || fields[1] != "r-xp" {
			continue
		}
		from, to, ok := strings.Cut(fields[0], "-")
		begin, err1 := strconv.ParseUint(from, 16, 64)
		end, err2 := strconv.ParseUint(to, 16, 64)
		if !ok || err1 != nil || err2 != nil || end <= begin {
			return fmt.Errorf("/proc/self/maps: unexpected line %q", lines.Text())
		}
		if _, _, errno := syscall.Syscall(syscall.SYS_MADVISE, uintptr(begin), uintptr(end-begin), syscall.MADV_DONTNEED); errno != 0 {
			return fmt.Errorf("madvise: %w", errno)
		}
	}
	return lines.Err()
}
