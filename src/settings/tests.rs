//! Configurations and the faults they must give, as data.
