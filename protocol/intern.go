package protocol

// known are the identification codes and units of the balances' manuals. A code that
// is known needs no allocation.
var known = func() map[string]string {
	m := map[string]string{}
	for _, s := range []string{
		"", "Stat", "N", "N1", "T", "T1", "T2", "PT2", "G#", "Qnt", "Prc", "D", "nRef", "pRef", "wRef", "Setp", "Min", "Max", "Lim",
		"Total", "Avg.", "Avg", "s", "srel", "Diff", "Diff.", "Nom", "Nom.", "Targ.", "ID", "L ID", "S ID", "W ID", "T COMP", "NUM", "Res", "Time",
		"g", "kg", "mg", "ct", "lb", "/lb", "oz", "ozt", "tlh", "tls", "tlt", "tlc", "gr", "GN", "dwt", "mom", "K", "tol", "bat", "MS", "%", "pcs", "!",
	} {
		m[s] = s
	}
	return m
}()

func intern(b []byte) string {
	if s, ok := known[string(b)]; ok {
		return s
	}
	return string(b)
}
