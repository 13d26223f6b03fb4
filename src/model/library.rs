//! Compiled code with a C interface, loaded into the process.
//!
//! **Why `unsafe`.** Loading a library runs its initialisers, and calling into it trusts its machine code: no compiler
//! can check either. This is the only file that does so, and nothing of it leaves: what it gives out are numbers.
//!
//! **What keeps it sound.** The version function is called before any other, and must return 1, so that a library that
//! was made for something else is refused before it gets a pointer. Input and output are slices of exactly `n d` and
//! `n r` doubles that live, unmoved, until the call returns; the input is only lent for reading and the output is
//! initialised. Function pointers are kept beside the library that they point into and never outlive it. With
//! `threads = 1` a lock lets one thread in at a time. What remains to be trusted is the library itself: that it has the
//! stated signature, stays within the arrays, keeps no pointer, and may be called from several threads where it said so.
#![allow(unsafe_code, reason = "the only way to call compiled code; the module's page says what keeps it sound")]

use super::Model;
use super::ModelError;
use super::check_shapes;
use crate::numeric::Points;
use libloading::Library;
use rayon::prelude::*;
use std::fmt;
use std::path::Path;
use std::path::PathBuf;
use std::sync::Mutex;
use std::sync::PoisonError;
use thiserror::Error;

/// Version of the C interface.
const VERSION: i32 = 1;
/// Name of the function that tells it.
const VERSION_FUNCTION: &str = "evenpoise_model_version";
/// Points of one call: enough for the library to vectorise, few enough to share them over the cores.
const CHUNK: usize = 256;

type VersionFunction = unsafe extern "C" fn() -> i32;
type ModelFunction = unsafe extern "C" fn(*const f64, usize, usize, *mut f64, usize) -> i32;

/// Why a library gives no answers.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum LibraryError {
    /// The system could not load it.
    #[error("the library {} cannot be loaded: {reason}", path.display())]
    NotLoaded {
        /// The file.
        path: PathBuf,
        /// The system's reason.
        reason: String,
    },
    /// A function is missing.
    #[error(
        "the library {} has no function `{symbol}`; export it with C linkage (extern \"C\" in C++) under that very name", path.display()
    )]
    NoSymbol {
        /// The file.
        path: PathBuf,
        /// The function.
        symbol: String,
    },
    /// It was made for another interface.
    #[error(
        "the library {} is made for version {found} of the interface, this program knows version 1: let `evenpoise_model_version` return 1",
        path.display()
    )]
    WrongVersion {
        /// The file.
        path: PathBuf,
        /// What the library said.
        found: i32,
    },
    /// It refused points.
    #[error(
        "`{symbol}` of {} returned {code} for {points} points from ({first}) on; it returns 0 when all is well, and answers NaN for a \
         single point that fails", path.display()
    )]
    Refused {
        /// The file.
        path: PathBuf,
        /// The function.
        symbol: String,
        /// What it returned.
        code: i32,
        /// Points that it was given.
        points: usize,
        /// The first of them.
        first: String,
    },
}

/// A library and the function in it that is the model.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct LibrarySpec {
    /// The file.
    pub file: PathBuf,
    /// The function.
    pub symbol: String,
    /// Values of a point.
    pub n_inputs: usize,
    /// Values of an answer.
    pub n_outputs: usize,
    /// Whether it may be called from several threads at once.
    pub any_thread: bool,
}

/// A model in a compiled library.
///
/// `int32_t evenpoise_model_version(void)` returns 1, and
/// `int32_t SYMBOL(const double *x, size_t n, size_t d, double *out, size_t r)` answers `n` points of `d` values with
/// `n r` numbers, point by point, and returns 0.
pub struct LibraryModel {
    spec: LibrarySpec,
    function: ModelFunction,
    one_at_a_time: Mutex<()>,
    /// The code that `function` points into; dropped after it.
    _library: Library,
}

impl LibraryModel {
    /// Loads the library and finds its functions.
    ///
    /// # Errors
    /// [`LibraryError`]: no such file, not a library, a function missing, another version of the interface.
    pub fn open(spec: LibrarySpec) -> Result<Self, LibraryError> {
        // A plain name would be looked for in the system's folders.
        let path = std::path::absolute(&spec.file).unwrap_or_else(|_| spec.file.clone());
        if !path.is_file() {
            let reason = "there is no such file".to_owned();
            return Err(LibraryError::NotLoaded { path: spec.file, reason });
        }
        // SAFETY: initialisers of the library run here. The user names the library; see the module's page.
        let library = unsafe { Library::new(&path) }
            .map_err(|error| LibraryError::NotLoaded { path: spec.file.clone(), reason: reason(&error) })?;
        let version: VersionFunction = symbol(&library, &spec.file, VERSION_FUNCTION)?;
        // SAFETY: the interface says that a function of this name takes nothing and returns an `int32_t`.
        let found = unsafe { version() };
        if found != VERSION {
            return Err(LibraryError::WrongVersion { path: spec.file, found });
        }
        let function: ModelFunction = symbol(&library, &spec.file, &spec.symbol)?;
        Ok(Self { spec, function, one_at_a_time: Mutex::new(()), _library: library })
    }

    /// Answers points that lie end to end in `x` into `out`.
    fn call(&self, x: &[f64], n: usize, out: &mut [f64]) -> Result<(), LibraryError> {
        let (d, r) = (self.spec.n_inputs, self.spec.n_outputs);
        assert!(x.len() == n * d && out.len() == n * r, "arrays have the sizes that the library is told");
        let _alone = (!self.spec.any_thread).then(|| self.one_at_a_time.lock().unwrap_or_else(PoisonError::into_inner));
        // SAFETY: the pointers are those of live slices whose lengths were just checked; `out` is initialised and nobody
        // else has it; the library is loaded as long as `self` lives.
        let code = unsafe { (self.function)(x.as_ptr(), n, d, out.as_mut_ptr(), r) };
        if code == 0 {
            return Ok(());
        }
        let first: Vec<String> = x.iter().take(d).map(|value| super::decimal(*value)).collect();
        Err(LibraryError::Refused {
            path: self.spec.file.clone(),
            symbol: self.spec.symbol.clone(),
            code,
            points: n,
            first: first.join(", "),
        })
    }
}

/// The function `name` of a library.
fn symbol<T: Copy>(library: &Library, path: &Path, name: &str) -> Result<T, LibraryError> {
    // SAFETY: `T` is one of the two function types of the interface, which the library promises for this name.
    let found = unsafe { library.get::<T>(name) };
    found
        .map(|function| *function)
        .map_err(|_| LibraryError::NoSymbol { path: path.to_path_buf(), symbol: name.to_owned() })
}

/// The system's reason, which stands behind "dlopen failed".
fn reason(error: &libloading::Error) -> String {
    std::error::Error::source(error).map_or_else(|| error.to_string(), ToString::to_string)
}

impl fmt::Debug for LibraryModel {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.debug_struct("LibraryModel").field("spec", &self.spec).finish_non_exhaustive()
    }
}

impl Model for LibraryModel {
    fn n_inputs(&self) -> usize {
        self.spec.n_inputs
    }

    fn n_outputs(&self) -> usize {
        self.spec.n_outputs
    }

    fn evaluate(&self, inputs: &Points, outputs: &mut Points) -> Result<(), ModelError> {
        check_shapes(self, inputs.dim(), outputs.dim())?;
        let (n, d, r) = (inputs.len(), self.spec.n_inputs, self.spec.n_outputs);
        let answer = |chunk: usize| -> Result<Vec<f64>, LibraryError> {
            let points = chunk * CHUNK..((chunk + 1) * CHUNK).min(n);
            let x: Vec<f64> = points.clone().flat_map(|i| (0..d).map(move |j| inputs.get(i, j))).collect();
            let mut out = vec![f64::NAN; points.len() * r];
            self.call(&x, points.len(), &mut out)?;
            Ok(out)
        };
        let chunks = n.div_ceil(CHUNK);
        let answers: Vec<Result<Vec<f64>, LibraryError>> = if self.spec.any_thread {
            (0..chunks).into_par_iter().map(answer).collect()
        } else {
            (0..chunks).map(answer).collect()
        };
        for (chunk, answers) in answers.into_iter().enumerate() {
            for (at, number) in answers?.into_iter().enumerate() {
                outputs.set(chunk * CHUNK + at / r, at % r, number);
            }
        }
        Ok(())
    }
}
