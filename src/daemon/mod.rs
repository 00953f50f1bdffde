//! Wiring: the loop that waits and the loop that applies, recovery, named tasks, the end.
