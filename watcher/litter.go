package watcher

import (
	"path"
	"strings"
)

// isLitter reports whether a base name is that of a temporary, partial or lock
// file, or of something the file system put there by itself. Case does not matter.
func isLitter(name string, more []string) bool {
	n := strings.ToLower(name)
	if strings.HasPrefix(n, ".") || strings.HasPrefix(n, "~$") || strings.HasSuffix(n, "~") {
		return true // hidden files, lock files of office programs, editor backups
	}
	switch n {
	case "thumbs.db", "desktop.ini", "icon\r":
		return true
	}
	switch path.Ext(n) {
	case ".part", ".partial", ".filepart", ".tmp", ".temp", ".crdownload", ".download", ".lock", ".lck", ".swp", ".swx":
		return true
	}
	return matchesAny(name, more)
}

// isLitterDir reports whether a directory is one that file systems keep for themselves.
func isLitterDir(name string) bool {
	n := strings.ToLower(name)
	return strings.HasPrefix(n, ".") || n == "$recycle.bin" || n == "system volume information" || n == "lost+found"
}

// matchesAny holds a name against globs, without regard to case.
func matchesAny(name string, globs []string) bool {
	for _, g := range globs {
		if ok, err := path.Match(strings.ToLower(g), strings.ToLower(name)); ok && err == nil {
			return true
		}
	}
	return false
}
