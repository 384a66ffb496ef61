package protocol

// known are the identification codes and units of the balances' manuals. What is
// known needs no allocation.
var known = func() map[string]string {
	m := map[string]string{}
	for _, s := range []string{
		"Stat", "N", "N1", "T", "T1", "T2", "PT2", "G#", "Qnt", "Prc", "D", "nRef", "pRef", "wRef", "mDef", "Mul", "x-Net", "x-Res",
		"Setp", "Min", "Max", "Lim", "W.Diff", "Diff.W", "Tot.cp", "T COMP", "S-Comp", "Cont.T", "n", "Total", "Avg.", "Avg", "s", "srel",
		"Diff", "Diff.", "*G", "*N", "Nom", "Nom.", "Targ.", "ID", "S ID", "L ID", "W ID", "NUM", "Res", "Time", "Ser.no",
		"g", "kg", "mg", "ct", "lb", "/lb", "oz", "ozt", "tlh", "tls", "tlt", "tlc", "gr", "GN", "dwt", "mom", "K", "tol", "bat", "MS", "%", "pcs", "!",
	} {
		m[s] = s
	}
	return m
}()

// intern gives b as a string. The commonest codes are told apart without a look-up.
func intern(b []byte) string {
	switch string(b) {
	case "":
		return ""
	case "g":
		return "g"
	case "N":
		return "N"
	case "mg":
		return "mg"
	}
	if s, ok := known[string(b)]; ok {
		return s
	}
	return string(b)
}
