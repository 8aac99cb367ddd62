//! What an image takes of a chip, read from its sections and symbols.
//!
//! Contract: counts what is loaded, by the sections' own flags: executable and
//! constant bytes sit in flash, initial values in both, the rest in RAM.

use object::{Object, ObjectSection, ObjectSymbol, SectionFlags, SectionKind, SymbolKind, elf};
use serde::Serialize;
use std::path::Path;
use thiserror::Error;

/// Why an image can not be read.
#[derive(Debug, Error)]
pub enum ElfError {
    /// The file can not be read.
    #[error("cannot read {path}: {why}")]
    Read {
        /// Which file.
        path: String,
        /// What the system said.
        why: std::io::Error,
    },
    /// It is no image.
    #[error("{path} is no image for a board: {why}")]
    Parse {
        /// Which file.
        path: String,
        /// What is wrong.
        why: object::read::Error,
    },
}

/// Sizes of an image, bytes.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct Sizes {
    /// Machine code.
    pub text_bytes: u64,
    /// Constants, vector table included.
    pub rodata_bytes: u64,
    /// Initial values: in flash, copied to RAM.
    pub data_bytes: u64,
    /// Memory that starts as zeros or as nothing.
    pub zeroed_bytes: u64,
    /// The largest object in RAM: the steward with its frames.
    pub steward_bytes: u64,
    /// From the end of static memory to the end of RAM; 0 = the image does not say.
    pub stack_room_bytes: u64,
}

impl Sizes {
    /// Flash in all.
    pub fn flash_bytes(&self) -> u64 {
        self.text_bytes + self.rodata_bytes + self.data_bytes
    }

    /// Static RAM in all.
    pub fn static_ram_bytes(&self) -> u64 {
        self.data_bytes + self.zeroed_bytes
    }
}

/// Sizes of the image in a file.
///
/// Errors: [`ElfError`].
pub fn sizes(path: &Path) -> Result<Sizes, ElfError> {
    let shown = path.display().to_string();
    let bytes = std::fs::read(path).map_err(|why| ElfError::Read { path: shown.clone(), why })?;
    sizes_of(&bytes).map_err(|why| ElfError::Parse { path: shown, why })
}

/// The same from bytes.
///
/// Errors: what the reader of object files says.
pub fn sizes_of(bytes: &[u8]) -> Result<Sizes, object::read::Error> {
    let file = object::File::parse(bytes)?;
    let mut sizes = Sizes::default();
    for section in file.sections() {
        let SectionFlags::Elf { sh_flags, .. } = section.flags() else { continue };
        let has = |flag: elf::SectionFlags| sh_flags.0 & flag.0 != 0;
        if !has(elf::SHF_ALLOC) {
            continue;
        }
        let slot = match section.kind() {
            SectionKind::UninitializedData | SectionKind::UninitializedTls => {
                &mut sizes.zeroed_bytes
            }
            _ if has(elf::SHF_EXECINSTR) => &mut sizes.text_bytes,
            _ if has(elf::SHF_WRITE) => &mut sizes.data_bytes,
            _ => &mut sizes.rodata_bytes,
        };
        *slot += section.size();
    }
    let (mut top, mut bottom) = (None, None);
    for symbol in file.symbols() {
        match symbol.name() {
            Ok("_stack_start") => top = Some(symbol.address()),
            Ok("_stack_end") => bottom = Some(symbol.address()),
            _ if symbol.kind() == SymbolKind::Data && is_in_ram(&file, &symbol) => {
                sizes.steward_bytes = sizes.steward_bytes.max(symbol.size());
            }
            _ => {}
        }
    }
    if let (Some(top), Some(bottom)) = (top, bottom) {
        sizes.stack_room_bytes = top.saturating_sub(bottom);
    }
    Ok(sizes)
}

fn is_in_ram<'d>(file: &object::File<'d>, symbol: &object::Symbol<'d, '_>) -> bool {
    let section = symbol.section_index().and_then(|at| file.section_by_index(at).ok());
    section.is_some_and(|section| {
        matches!(section.kind(), SectionKind::UninitializedData | SectionKind::Data)
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn refuses_what_is_no_image() {
        assert!(sizes_of(b"not at all").is_err());
    }

    /// This very program is an image too, if not one for a board.
    #[test]
    fn counts_code_constants_and_memory_of_a_real_image() {
        let own = std::env::current_exe().unwrap();
        let found = sizes(&own).unwrap();
        assert!(found.text_bytes > 100_000 && found.rodata_bytes > 10_000, "{found:?}");
        assert!(found.zeroed_bytes > 0 && found.data_bytes > 0, "{found:?}");
        assert!(found.flash_bytes() < std::fs::metadata(&own).unwrap().len());
    }

    #[test]
    fn says_which_file_it_can_not_read() {
        let said = sizes(Path::new("no/such.elf")).unwrap_err().to_string();
        assert!(said.contains("no/such.elf"), "{said}");
    }
}
