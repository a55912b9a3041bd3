//! Reading an upload, and answering with a file.

use axum::RequestExt;
use axum::body::Body;
use axum::extract::{Multipart, Request};
use axum::http::{HeaderName, HeaderValue, header};
use axum::response::{IntoResponse, Response};

use super::{Attachment, LARGEST, MediaType, Sent, disposition};
use crate::error::Error;

/// Largest request that is read to its end, bytes: a browser that is cut off says nothing
/// of why, so that a file too large is read, dropped, and answered with a sentence.
pub const READ_TO_THE_END: usize = 8 * LARGEST;

fn too_large() -> Error {
    Error::field(
        "file",
        "This file is larger than 5 MB. Scan it with fewer dots per inch, or photograph it smaller.",
    )
}

fn cut_off() -> Error {
    Error::field("file", "The file was cut off on its way. Send it again.")
}

fn none_chosen() -> Error {
    Error::field("file", "Choose a PDF or a PNG, JPEG or WebP picture.")
}

/// The bytes of one part, at most [`LARGEST`] of them in memory.
#[derive(Default)]
struct Held {
    bytes: Vec<u8>,
    overflowed: bool,
}

impl Held {
    fn take(&mut self, chunk: &[u8]) {
        if self.bytes.len() + chunk.len() > LARGEST {
            self.overflowed = true;
            self.bytes = Vec::new();
        }
        if !self.overflowed {
            self.bytes.extend_from_slice(chunk);
        }
    }

    fn sent(self, name: String) -> Result<Sent, Error> {
        if self.overflowed {
            return Err(too_large());
        }
        if self.bytes.is_empty() {
            return Err(none_chosen());
        }
        Ok(Sent {
            name,
            bytes: self.bytes,
        })
    }
}

/// The part `file` of a form with parts.
pub async fn form(request: Request) -> Result<Sent, Error> {
    let mut parts: Multipart = request.extract().await.map_err(|_| none_chosen())?;
    let mut found = None;
    while let Some(mut part) = parts.next_field().await.map_err(|_| cut_off())? {
        if part.name() != Some("file") || found.is_some() {
            continue;
        }
        let name = part.file_name().unwrap_or_default().to_owned();
        let mut held = Held::default();
        while let Some(chunk) = part.chunk().await.map_err(|_| cut_off())? {
            held.take(&chunk);
        }
        found = Some((held, name));
    }
    let (held, name) = found.ok_or_else(none_chosen)?;
    held.sent(name)
}

/// A file that is the whole body, or a form with parts. `name`: what it is called, where
/// the body cannot tell.
pub async fn file(request: Request, name: String) -> Result<Sent, Error> {
    let kind = request.headers().get(header::CONTENT_TYPE);
    let kind = kind.and_then(|kind| kind.to_str().ok()).unwrap_or_default();
    let kind = kind
        .split(';')
        .next()
        .unwrap_or_default()
        .trim()
        .to_lowercase();
    if kind == "multipart/form-data" {
        return form(request).await;
    }
    if MediaType::from_key(&kind).is_none() {
        return Err(Error::field(
            "",
            "Content-Type: send application/pdf, image/png, image/jpeg or image/webp with the file as the body, or multipart/form-data with a part named file.",
        ));
    }
    let bytes = axum::body::to_bytes(request.into_body(), LARGEST + 1)
        .await
        .map_err(|_| too_large())?;
    let mut held = Held::default();
    held.take(&bytes);
    held.sent(name)
}

/// A file to look at and nothing else: it runs no script, loads nothing, stands in no
/// frame, and is taken for nothing but what it is.
pub fn answer(attachment: &Attachment, bytes: Vec<u8>) -> Response {
    let header = |value: &str| HeaderValue::from_str(value);
    let name = header(&disposition(&attachment.file_name));
    let name = name.unwrap_or(HeaderValue::from_static("inline"));
    let tag = header(&format!("\"{}\"", attachment.sha256));
    let tag = tag.unwrap_or(HeaderValue::from_static("\"\""));
    let headers: [(HeaderName, HeaderValue); 5] = [
        (
            header::CONTENT_TYPE,
            HeaderValue::from_static(attachment.media_type.key()),
        ),
        (header::CONTENT_DISPOSITION, name),
        (header::ETAG, tag),
        (
            header::CONTENT_SECURITY_POLICY,
            HeaderValue::from_static("default-src 'none'; sandbox; frame-ancestors 'none'"),
        ),
        (
            HeaderName::from_static("cross-origin-resource-policy"),
            HeaderValue::from_static("same-origin"),
        ),
    ];
    (headers, Body::from(bytes)).into_response()
}
