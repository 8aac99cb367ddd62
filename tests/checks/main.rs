//! x
use clarabel as _;
use hedgerow as _;
