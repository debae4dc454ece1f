//! The press: virtual files -> PDF, by the typesetter as a library.
//!
//! The typesetter sees the files it is given and nothing else: no disk, no network, no clock. Its functions that run
//! text as code (`eval`, `plugin`) are taken out of the library for every template, shipped or not.

use std::collections::BTreeMap;
use std::sync::{Arc, LazyLock};

use typst::comemo;
use typst::diag::{FileError, FileResult, Severity as Grade, SourceDiagnostic};
use typst::foundations::{Binding, Bytes, Datetime, Duration, Module, Scope, Smart};
use typst::syntax::{FileId, RootedPath, Source, Span, VirtualPath, VirtualRoot};
use typst::text::{Font, FontBook};
use typst::utils::LazyHash;
use typst::{Library, LibraryExt, World, WorldExt};
use typst_layout::PagedDocument;
use typst_pdf::{PdfOptions, PdfStandard, PdfStandards};

use crate::diagnostic::{Diagnostic, Diagnostics};
use crate::source::Place;

/// Everything that typesetting one note reads: virtual files by path, the first of which is `note.typ`.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Sources {
    pub files: BTreeMap<String, Arc<[u8]>>,
    /// Identifies the document across its issues; its digest becomes the identifier in the PDF.
    pub ident: String,
    /// Name and version of the program, for the metadata.
    pub creator: String,
    /// Paths of templates that the notebook brought: code that did not ship with the program. Such sources should be
    /// typeset in a process with a time limit, for the typesetter itself has none.
    pub foreign: Vec<String>,
    /// Paths of the notebook's images, for messages.
    pub images: Vec<String>,
}

impl Sources {
    /// As bytes for another process: the header as one line of JSON with the length of each file, then the files.
    pub fn to_bytes(&self) -> Vec<u8> {
        let lengths: Vec<(&String, usize)> =
            self.files.iter().map(|(path, bytes)| (path, bytes.len())).collect();
        let header = serde_json::json!([self.ident, self.creator, self.foreign, self.images, lengths]);
        let mut out = header.to_string().into_bytes();
        out.push(b'\n');
        self.files.values().for_each(|bytes| out.extend_from_slice(bytes));
        out
    }

    /// Reads what [`Sources::to_bytes`] wrote; `None` where the bytes are something else.
    pub fn from_bytes(bytes: &[u8]) -> Option<Sources> {
        type Header = (String, String, Vec<String>, Vec<String>, Vec<(String, usize)>);
        let end = bytes.iter().position(|byte| *byte == b'\n')?;
        let (ident, creator, foreign, images, lengths): Header =
            serde_json::from_slice(&bytes[..end]).ok()?;
        let mut rest = &bytes[end + 1..];
        let mut files = BTreeMap::new();
        for (path, length) in lengths {
            let (file, after) = rest.split_at_checked(length)?;
            files.insert(path, file.into());
            rest = after;
        }
        rest.is_empty().then_some(Sources { files, ident, creator, foreign, images })
    }
}

/// Library and fonts, made once a process.
struct Press {
    library: LazyHash<Library>,
    book: LazyHash<FontBook>,
    fonts: Vec<Font>,
}

static PRESS: LazyLock<Press> = LazyLock::new(|| {
    let mut book = FontBook::new();
    let mut fonts = Vec::new();
    for (font, info) in typst_kit::fonts::embedded() {
        book.push(info);
        fonts.push(font);
    }
    Press { library: LazyHash::new(library()), book: LazyHash::new(book), fonts }
});

/// The typesetter's library without what runs text as code.
fn library() -> Library {
    let mut library = Library::default();
    let mut scope = Scope::new();
    for (name, binding) in library.global.scope().iter() {
        if name != "eval" && name != "plugin" {
            scope.bind(name.clone(), binding.clone());
        }
    }
    let global = Module::new("global", scope);
    library.std = Binding::detached(global.clone());
    library.global = global;
    library
}

/// Whether some embedded font has a glyph for `c`; others would leave a hole in the text (and in the archive's rules).
pub fn prints(c: char) -> bool {
    let press = &*PRESS;
    (0..press.fonts.len())
        .filter_map(|index| press.book.info(index))
        .any(|info| info.coverage.contains(u32::from(c)))
}

/// One note on the press.
struct Desk<'a> {
    press: &'static Press,
    main: FileId,
    sources: BTreeMap<String, FileResult<Source>>,
    files: &'a BTreeMap<String, Arc<[u8]>>,
}

impl Desk<'_> {
    /// The virtual path of a file; packages have none here.
    fn path(id: FileId) -> String {
        match id.root() {
            VirtualRoot::Project => id.vpath().get_without_slash().to_owned(),
            VirtualRoot::Package(_) => String::new(),
        }
    }
}

impl World for Desk<'_> {
    fn library(&self) -> &LazyHash<Library> {
        &self.press.library
    }

    fn book(&self) -> &LazyHash<FontBook> {
        &self.press.book
    }

    fn main(&self) -> FileId {
        self.main
    }

    fn source(&self, id: FileId) -> FileResult<Source> {
        let path = Desk::path(id);
        match self.sources.get(&path) {
            Some(source) => source.clone(),
            None => Err(FileError::NotFound(path.into())),
        }
    }

    fn file(&self, id: FileId) -> FileResult<Bytes> {
        let path = Desk::path(id);
        match self.files.get(&path) {
            Some(bytes) => Ok(Bytes::new(bytes.clone())),
            None => Err(FileError::NotFound(path.into())),
        }
    }

    fn font(&self, index: usize) -> Option<Font> {
        self.press.fonts.get(index).cloned()
    }

    fn today(&self, _: Option<Duration>) -> Option<Datetime> {
        None
    }
}

/// Typesets `sources` to a PDF that is PDF/A-3a and PDF/UA-1 at once; the second part are the typesetter's warnings.
///
/// Errors name the template, line and column. Pure: the same sources give the same bytes.
pub fn press(sources: &Sources) -> (Result<Vec<u8>, Diagnostics>, Diagnostics) {
    // The typesetter remembers every layout it ever made; notes have nothing in common that is worth keeping. Forgotten
    // before the next one, not after each: the last note of a run need not wait for it.
    comemo::evict(0);
    let Some(main) = file_id("note.typ") else {
        return (
            Err(Diagnostic::bare("the template note.typ cannot be named").into()),
            Diagnostics::default(),
        );
    };
    let mut texts = BTreeMap::new();
    for (path, bytes) in sources.files.iter().filter(|(path, _)| path.ends_with(".typ")) {
        let source = match (std::str::from_utf8(bytes), file_id(path)) {
            (Ok(text), Some(id)) => Ok(Source::new(id, text.to_owned())),
            _ => Err(FileError::InvalidUtf8),
        };
        texts.insert(path.clone(), source);
    }
    let desk = Desk { press: &PRESS, main, sources: texts, files: &sources.files };
    let warned = typst::compile::<PagedDocument>(&desk);
    let warnings = Diagnostics(warned.warnings.iter().map(|warning| translate(&desk, warning)).collect());
    let pdf = warned.output.and_then(|document| {
        let standards = PdfStandards::new(&[PdfStandard::A_3a, PdfStandard::Ua_1]).map_err(|error| {
            typst::ecow::eco_vec![SourceDiagnostic::error(Span::detached(), error.message().clone())]
        })?;
        let options = PdfOptions {
            ident: Smart::Custom(sources.ident.clone()),
            creator: Smart::Custom(Some(sources.creator.clone())),
            standards,
            ..PdfOptions::default()
        };
        typst_pdf::pdf(&document, &options)
    });
    let pdf = pdf.map_err(|errors| {
        let mut out = Diagnostics::default();
        for error in &errors {
            let mut found = translate(&desk, error);
            if (error.message.contains("image") || error.message.contains("SVG"))
                && !sources.images.is_empty()
            {
                found.expected =
                    Some(format!("images that can be decoded; the note shows {}", sources.images.join(", ")));
            }
            out.push(found);
        }
        out
    });
    (pdf, warnings)
}

/// Typesets `sources`: see [`press`].
pub fn compile(sources: &Sources) -> Result<Vec<u8>, Diagnostics> {
    press(sources).0
}

fn file_id(path: &str) -> Option<FileId> {
    VirtualPath::new(path).ok().map(|path| RootedPath::new(VirtualRoot::Project, path).intern())
}

/// A message of the typesetter as a diagnostic: at the place in a template, or at the nearest call of the trace that is
/// in one.
fn translate(desk: &Desk, diagnostic: &SourceDiagnostic) -> Diagnostic {
    let here = place(desk, diagnostic.span);
    let place = here.or_else(|| diagnostic.trace.iter().find_map(|point| place(desk, point.span)));
    let message = format!("typesetting: {}", diagnostic.message);
    let mut out = match place {
        Some(place) if diagnostic.severity == Grade::Warning => Diagnostic::warning(&place, message),
        Some(place) => Diagnostic::error(&place, message),
        None => Diagnostic::bare(message),
    };
    out.expected = diagnostic.hints.first().map(|hint| hint.v.to_string());
    out
}

fn place(desk: &Desk, span: impl Into<typst::syntax::DiagSpan>) -> Option<Place> {
    let span = span.into();
    let id = span.id()?;
    let range = desk.range(span)?;
    let path = Desk::path(id);
    let source = desk.source(id).ok()?;
    let name: Arc<str> = format!("templates/{path}").into();
    Some(Place::of_bytes(&name, source.text(), range.start, range.len()))
}
