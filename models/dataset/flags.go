package dataset

import "strings"

// flag writes a flag and its value as they are typed in a shell: --column 'k=slope 1'.
func flag(name, value string) string {
	return "--" + name + " '" + strings.ReplaceAll(value, "'", `'\''`) + "'"
}

// columnFlag is --column for one heading.
func columnFlag(role, heading string) string { return flag("column", role+"="+heading) }

// columnFlags writes the flag --column for each of several headings.
func columnFlags(role string, headings []string, between string) string {
	const most = 8
	var flags []string
	for _, h := range headings[:min(most, len(headings))] {
		flags = append(flags, columnFlag(role, h))
	}
	return strings.Join(flags, between)
}
