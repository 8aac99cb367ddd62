//! x
use hedgerow as _; use clarabel as _;
