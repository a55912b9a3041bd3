//! Certificates of lots and safety data sheets of materials: PDFs and pictures.
//!
//! A file comes from anybody's disk and is shown to everybody, so that what it is told by
//! its first bytes and never by its name ([`MediaType::of`]), its name is cleaned before
//! it is kept ([`file_name`]), and it is answered in a way that lets it do nothing but be
//! looked at. The newest counts; the ones before it stay to be read. The same file sent
//! again is kept once.

use crate::id::{AttachmentId, MaterialId, MaterialLotId, UtcTime};

pub mod api;
pub mod operations;
pub mod pages;
pub mod store;
pub mod upload;

/// Largest file that is kept, bytes: 5 MB. As in the schema.
pub const LARGEST: usize = 5 * 1024 * 1024;

/// What a file is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MediaType {
    /// A document.
    Pdf,
    /// A picture.
    Png,
    /// A photograph.
    Jpeg,
    /// A picture or photograph.
    Webp,
}

impl MediaType {
    /// Every type that is kept.
    pub const ALL: [Self; 4] = [Self::Pdf, Self::Png, Self::Jpeg, Self::Webp];

    /// What these bytes begin like. `None`: nothing that is kept.
    ///
    /// Source: ISO 32000-2, 7.5.2; PNG (W3C), 5.2; JPEG (ITU-T T.81), B.2.1; the RIFF
    /// header of WebP (RFC 9649), 2.4.
    pub fn of(bytes: &[u8]) -> Option<Self> {
        if bytes.starts_with(b"%PDF-") {
            Some(Self::Pdf)
        } else if bytes.starts_with(b"\x89PNG\r\n\x1a\n") {
            Some(Self::Png)
        } else if bytes.starts_with(b"\xff\xd8\xff") {
            Some(Self::Jpeg)
        } else if bytes.starts_with(b"RIFF") && bytes.get(8..12) == Some(b"WEBP") {
            Some(Self::Webp)
        } else {
            None
        }
    }

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Pdf => "application/pdf",
            Self::Png => "image/png",
            Self::Jpeg => "image/jpeg",
            Self::Webp => "image/webp",
        }
    }

    /// The type with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|it| it.key() == key)
    }

    /// How names of such files end; the first is the usual one.
    const fn endings(self) -> &'static [&'static str] {
        match self {
            Self::Pdf => &[".pdf"],
            Self::Png => &[".png"],
            Self::Jpeg => &[".jpg", ".jpeg"],
            Self::Webp => &[".webp"],
        }
    }
}

/// What a file belongs to.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Subject {
    /// A safety data sheet of a material.
    Material(MaterialId),
    /// A certificate of one of its lots.
    Lot(MaterialId, MaterialLotId),
}

impl Subject {
    /// The material.
    pub const fn material(self) -> MaterialId {
        match self {
            Self::Material(id) | Self::Lot(id, _) => id,
        }
    }

    /// The lot, for a certificate.
    pub const fn lot(self) -> Option<MaterialLotId> {
        match self {
            Self::Material(_) => None,
            Self::Lot(_, id) => Some(id),
        }
    }

    /// What the file is to it.
    pub const fn what(self) -> &'static str {
        match self {
            Self::Material(_) => "safety data sheet",
            Self::Lot(..) => "certificate",
        }
    }
}

/// A file that was kept, without its bytes.
#[derive(Clone, Debug, PartialEq)]
pub struct Attachment {
    /// Its identifier.
    pub id: AttachmentId,
    /// What it belongs to.
    pub subject: Subject,
    /// Its name, cleaned, with the ending of its type.
    pub file_name: String,
    /// What it is.
    pub media_type: MediaType,
    /// How large, bytes.
    pub size: usize,
    /// Its SHA-256, hexadecimal.
    pub sha256: String,
    /// When it was attached.
    pub attached_at: UtcTime,
    /// By whom.
    pub attached_by: String,
}

/// A file as it was sent.
#[derive(Debug)]
pub struct Sent {
    /// The name it was sent with.
    pub name: String,
    /// What is in it, at most [`LARGEST`] bytes.
    pub bytes: Vec<u8>,
}

/// Longest name that is kept, characters, without its ending.
const LONGEST_NAME: usize = 100;

/// A name that is safe to keep, show and send: its last part, without what cannot be
/// printed, turns the writing round or means something to a shell or a disk, and with the
/// ending of what the file really is.
pub fn file_name(sent: &str, media_type: MediaType, otherwise: &str) -> String {
    let last = sent.rsplit(['/', '\\']).next().unwrap_or_default();
    let kept: String = last
        .chars()
        .filter(|c| {
            !c.is_control()
                && !"\"<>:|?*;%$`'&".contains(*c)
                && !matches!(*c, '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{feff}')
        })
        .take(LONGEST_NAME)
        .collect();
    let kept = kept.trim_matches([' ', '.']);
    let kept = if kept.is_empty() { otherwise } else { kept };
    let lower = kept.to_lowercase();
    let endings = media_type.endings();
    if endings.iter().any(|ending| lower.ends_with(ending)) {
        kept.to_owned()
    } else {
        format!("{kept}{}", endings.first().copied().unwrap_or_default())
    }
}

/// The header that shows a file in the browser under its name (RFC 6266 and 8187).
pub fn disposition(file_name: &str) -> String {
    let plain: String = file_name
        .chars()
        .map(|c| {
            if c.is_ascii_alphanumeric() || " .-_()+,=@".contains(c) {
                c
            } else {
                '_'
            }
        })
        .collect();
    let mut exact = String::new();
    for byte in file_name.bytes() {
        if byte.is_ascii_alphanumeric() || b"!#+-.^_|~".contains(&byte) {
            exact.push(char::from(byte));
        } else {
            exact.push_str(&format!("%{byte:02X}"));
        }
    }
    format!("inline; filename=\"{plain}\"; filename*=UTF-8''{exact}")
}
