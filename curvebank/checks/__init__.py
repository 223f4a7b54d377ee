"""Rules that judge records, fresh or stored; each rule is a small function."""
