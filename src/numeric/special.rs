//! Special functions in one place: the names a formula or a distribution asks for. The work is in the files beside.

pub use super::beta::{beta_log_tails, beta_quantile, ln_beta, log_beta_front};
pub use super::beta::{student_t_log_constant, student_t_log_upper_tail, student_t_quantile};
pub use super::error_function::{erf, erfc, log_erfc};
pub use super::gamma::{chi_squared_quantile, gamma_deviance, gamma_log_tails, gamma_quantile, log_gamma_front};
pub use super::gamma::{digamma, ln_gamma, ln_gamma_1p, ln_gamma_spread, log1p_minus, stirling_rest};
pub use super::normal::{log_lower_tail, log_upper_tail, lower_tail, upper_tail};
pub use super::tails::{LogTails, log_one_minus_exp};
