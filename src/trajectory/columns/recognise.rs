//! The first bytes of a file to its format. A name says nothing here.

use crate::fault::Fault;

/// As many first bytes as [`recognise`] can make use of.
pub const FIRST_BYTES: usize = 4096;

/// A format that is no plain text.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Format {
    /// One array of NumPy.
    Npy,
    /// Arrays of NumPy in a zip archive.
    Npz,
    /// Matrices of MATLAB, versions 5 to 7.
    Mat5,
    /// Matrices of MATLAB, version 4: not read.
    Mat4,
    /// HDF5, which MATLAB 7.3 writes as well.
    Hdf5,
    /// Parquet.
    Parquet,
    /// Text behind gzip; see [`crate::trajectory::packed`].
    Gzip,
    /// Text behind zstd; see [`crate::trajectory::packed`].
    Zstd,
    /// A zip archive of something else: not read.
    Zip,
    /// Another known format, by its name: not read.
    Other(&'static str),
}

const HDF5: &[u8] = b"\x89HDF\r\n\x1a\n";

/// Beginnings that are enough to tell a format.
const BEGINNINGS: [(&[u8], Format); 18] = [
    (b"\x93NUMPY", Format::Npy),
    (HDF5, Format::Hdf5),
    (b"PAR1", Format::Parquet),
    (
        b"PARE",
        Format::Other("Parquet data with an encrypted footer"),
    ),
    (b"\x1f\x8b", Format::Gzip),
    (b"\x28\xb5\x2f\xfd", Format::Zstd),
    (b"PK\x05\x06", Format::Zip),
    (b"ARROW1", Format::Other("Arrow (Feather) data")),
    (b"FEA1", Format::Other("Feather data")),
    (b"BZh", Format::Other("bzip2 data")),
    (b"\xfd7zXZ\0", Format::Other("xz data")),
    (b"\x04\x22\x4d\x18", Format::Other("lz4 data")),
    (b"CDF\x01", Format::Other("NetCDF data")),
    (b"CDF\x02", Format::Other("NetCDF data")),
    (b"CDF\x05", Format::Other("NetCDF data")),
    (b"SQLite format 3\0", Format::Other("an SQLite database")),
    (b"\xff\xfe", Format::Other("text in UTF-16")),
    (b"\xfe\xff", Format::Other("text in UTF-16")),
];

/// What a file is by its first bytes (give [`FIRST_BYTES`] if there are as many);
/// nothing where it may be text.
pub fn recognise(first_bytes: &[u8]) -> Option<Format> {
    let beginning = BEGINNINGS
        .iter()
        .find(|(beginning, _)| first_bytes.starts_with(beginning));
    if let Some(&(_, format)) = beginning {
        return Some(format);
    }
    if first_bytes.starts_with(b"PK\x03\x04") {
        return Some(zip(first_bytes));
    }
    // A frame of zstd that is passed over: sixteen magic numbers.
    if matches!(first_bytes, [0x50..=0x5f, 0x2a, 0x4d, 0x18, ..]) {
        return Some(Format::Zstd);
    }
    if matches!(
        first_bytes.get(124..128),
        Some(b"\x00\x01IM" | b"\x01\x00MI")
    ) {
        return Some(Format::Mat5);
    }
    // HDF5 may stand behind a block of the user's at any power of two from 512.
    let behind = [512, 1024, 2048].into_iter();
    if behind
        .filter_map(|at| first_bytes.get(at..))
        .any(|rest| rest.starts_with(HDF5))
    {
        return Some(Format::Hdf5);
    }
    is_mat4(first_bytes).then_some(Format::Mat4)
}

/// An archive whose first member is an array is one of NumPy.
fn zip(bytes: &[u8]) -> Format {
    let length = match bytes.get(26..28) {
        Some(&[low, high]) => usize::from(u16::from_le_bytes([low, high])),
        _ => 0,
    };
    match bytes.get(30..30 + length) {
        Some(name) if name.ends_with(b".npy") => Format::Npz,
        _ => Format::Zip,
    }
}

/// Version 4 has no magic number: five small words and a name that ends with a zero.
fn is_mat4(bytes: &[u8]) -> bool {
    let word = |at: usize, big: bool| {
        let four: Option<[u8; 4]> = bytes.get(4 * at..4 * at + 4)?.try_into().ok();
        four.map(|four| match big {
            true => u32::from_be_bytes(four),
            false => u32::from_le_bytes(four),
        })
    };
    [false, true].into_iter().any(|big| {
        let words: Option<Vec<u32>> = (0..5).map(|at| word(at, big)).collect();
        let Some(&[kind, _, _, imaginary, length]) = words.as_deref() else {
            return false;
        };
        let kind = match big {
            true => kind.wrapping_sub(1000),
            false => kind,
        };
        let end = 20 + length as usize;
        kind < 60
            && kind % 10 < 3
            && imaginary < 2
            && (2..=64).contains(&length)
            && bytes.get(end - 1) == Some(&0)
            && bytes.get(20).is_some_and(u8::is_ascii_alphabetic)
    })
}

impl Format {
    /// What the file is, in words.
    pub fn name(self) -> &'static str {
        match self {
            Format::Npy => "a NumPy array",
            Format::Npz => "an archive of NumPy arrays",
            Format::Mat5 => "a MATLAB file",
            Format::Mat4 => "a MATLAB file of version 4",
            Format::Hdf5 => "HDF5 data",
            Format::Parquet => "Parquet data",
            Format::Gzip => "gzip data",
            Format::Zstd => "zstd data",
            Format::Zip => "a zip archive without NumPy arrays",
            Format::Other(name) => name,
        }
    }

    /// True for packed text, which is no table by itself.
    pub fn is_packed(self) -> bool {
        matches!(self, Format::Gzip | Format::Zstd)
    }

    /// The complaint about a file that cannot be read as columns.
    pub fn refusal(self) -> Fault {
        let fault = Fault::new(format!("this file is {}", self.name()));
        let build = |feature| {
            format!(
                "this build cannot read it: install with `cargo install --path . --features {feature}`"
            )
        };
        match self {
            Format::Parquet => fault.help(build("parquet")),
            Format::Hdf5 => fault.help(build("hdf5")),
            Format::Mat4 => fault.help("save it with `-v7`"),
            Format::Other("text in UTF-16") => fault.help("save it as UTF-8"),
            Format::Gzip | Format::Zstd => fault.help("only text can be packed"),
            _ => fault.help("write text, .npy, .npz, .mat, Parquet or HDF5"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn text_is_no_format_and_beginnings_are() {
        for text in [
            "",
            "t,x\n0,1\n",
            "PK",
            "0 1 2 3 4 5 6 7 8 9\n",
            "\u{feff}t,x\n",
        ] {
            assert_eq!(recognise(text.as_bytes()), None, "{text:?}");
        }
        assert_eq!(recognise(&"1,2\n".repeat(1000).into_bytes()), None);
        let mut mat = [b' '; 128];
        mat[124..].copy_from_slice(b"\x00\x01IM");
        assert_eq!(recognise(&mat), Some(Format::Mat5));
        let mut behind = vec![0; 512];
        behind.extend(HDF5);
        assert_eq!(recognise(&behind), Some(Format::Hdf5));
        let version_4 = [0, 3, 1, 0, 2].map(u32::to_le_bytes).concat();
        let version_4 = [&version_4[..], b"x\0"].concat();
        assert_eq!(recognise(&version_4), Some(Format::Mat4));
        assert_eq!(
            recognise(b"\xff\xfet\0"),
            Some(Format::Other("text in UTF-16"))
        );
    }

    #[test]
    fn what_is_not_read_is_named() {
        assert_eq!(
            Format::Mat4.refusal().to_string(),
            "this file is a MATLAB file of version 4\n  help: save it with `-v7`"
        );
        assert_eq!(
            Format::Parquet.refusal().to_string(),
            "this file is Parquet data\n  help: this build cannot read it: \
             install with `cargo install --path . --features parquet`"
        );
    }
}
