package command

import "golang.org/x/sys/windows"

// freeSpace returns how many bytes may be written where a folder is, and whether that is known.
func freeSpace(folder string) (int64, bool) {
	path, err := windows.UTF16PtrFromString(folder)
	if err != nil {
		return 0, false
	}
	var free uint64
	if err := windows.GetDiskFreeSpaceEx(path, &free, nil, nil); err != nil {
		return 0, false
	}
	return int64(free), true
}
