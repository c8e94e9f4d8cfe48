//! All integration tests, in one binary: one link, one run.

mod reference_answers;
mod faults;
mod command_line;
mod cases;
mod carried;
mod checks_of_demos;
mod coverage;
mod served;
mod tidiness;
mod other_scales;
mod reference;
mod published;
mod calibration;
