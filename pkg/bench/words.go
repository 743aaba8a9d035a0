package bench

import "strings"

// Words makes a key readable: "channels.voltage.gain" is "voltage gain",
// "contact_potential" is "contact potential". It is for people; a record keeps keys.
func Words(key string) string {
	s := key
	for _, table := range []string{"channels.", "corrections.", "environment.", "instruments.", "quantities."} {
		s = strings.TrimPrefix(s, table)
	}
	// A key that repeats the end of its table says nothing more:
	// offset_current.current is the offset current.
	if table, key, ok := strings.Cut(s, "."); ok && (table == key || strings.HasSuffix(table, "_"+key)) {
		s = table
	}
	s = strings.NewReplacer("_", " ", ".", " ").Replace(s)
	return strings.ReplaceAll(s, "coulomb constant", "Coulomb constant")
}
