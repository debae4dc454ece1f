//! What a test asks of a PDF, read by a library that had no part in writing it.

use lopdf::{Dictionary, Document, Object, ObjectId};

pub struct Pdf {
    document: Document,
}

pub struct Attached {
    pub name: String,
    pub mime: String,
    pub relationship: String,
    pub bytes: Vec<u8>,
}

impl Pdf {
    pub fn read(bytes: &[u8]) -> Pdf {
        Pdf { document: Document::load_mem(bytes).expect("a PDF that opens") }
    }

    pub fn pages(&self) -> u32 {
        self.document.get_pages().len() as u32
    }

    /// Text of a page, with plain spaces.
    pub fn text(&self, page: u32) -> String {
        let text = self.document.extract_text(&[page]).expect("text that can be read");
        words(&text)
    }

    pub fn all_text(&self) -> String {
        (1..=self.pages()).map(|page| self.text(page)).collect::<Vec<_>>().join(" ")
    }

    fn catalog(&self) -> &Dictionary {
        self.document.catalog().expect("a catalog")
    }

    fn follow<'a>(&'a self, object: &'a Object) -> &'a Object {
        match object {
            Object::Reference(id) => self.document.get_object(*id).expect("an object"),
            other => other,
        }
    }

    pub fn xmp(&self) -> String {
        let metadata = self.follow(self.catalog().get(b"Metadata").expect("metadata"));
        let stream = metadata.as_stream().expect("a stream");
        let bytes = stream.decompressed_content().unwrap_or_else(|_| stream.content.clone());
        String::from_utf8(bytes).expect("UTF-8")
    }

    pub fn language(&self) -> String {
        decoded(self.follow(self.catalog().get(b"Lang").expect("a language")))
    }

    pub fn is_tagged(&self) -> bool {
        let marked =
            self.follow(self.catalog().get(b"MarkInfo").expect("mark info")).as_dict().expect("a dictionary");
        self.catalog().has(b"StructTreeRoot")
            && marked.get(b"Marked").is_ok_and(|m| m.as_bool().unwrap_or(false))
    }

    /// Date of creation, to the day.
    pub fn created(&self) -> String {
        let info =
            self.follow(self.document.trailer.get(b"Info").expect("info")).as_dict().expect("a dictionary");
        decoded(self.follow(info.get(b"CreationDate").expect("a date"))).chars().take(10).collect()
    }

    pub fn paper(&self) -> (i64, i64) {
        let page = self.document.get_pages()[&1];
        let media = self.document.get_dictionary(page).expect("a page").get(b"MediaBox").expect("a size");
        let side = |i: usize| {
            self.follow(media).as_array().expect("an array")[i].as_float().expect("a number").round() as i64
        };
        (side(2), side(3))
    }

    fn dictionaries(&self) -> impl Iterator<Item = (ObjectId, &Dictionary)> {
        self.document.objects.iter().filter_map(|(id, object)| match object {
            Object::Dictionary(dictionary) => Some((*id, dictionary)),
            Object::Stream(stream) => Some((*id, &stream.dict)),
            _ => None,
        })
    }

    /// How many font files are embedded; fails where a font descriptor has none.
    pub fn fonts_embedded(&self) -> usize {
        let descriptors = self.dictionaries().filter(|(_, d)| d.has_type(b"FontDescriptor"));
        descriptors
            .map(|(id, d)| {
                let embedded = ["FontFile", "FontFile2", "FontFile3"].iter().any(|key| d.has(key.as_bytes()));
                assert!(embedded, "font descriptor {id:?} without a font file");
            })
            .count()
    }

    pub fn raster_images(&self) -> usize {
        self.dictionaries()
            .filter(|(_, d)| d.get(b"Subtype").is_ok_and(|s| s.as_name().is_ok_and(|n| n == b"Image")))
            .count()
    }

    fn structure(&self) -> impl Iterator<Item = (&[u8], &Dictionary)> {
        self.dictionaries()
            .filter_map(|(_, d)| d.get(b"S").ok().and_then(|s| s.as_name().ok()).map(|name| (name, d)))
    }

    /// How many formulas there are, and how many formulas and figures have no alternative text.
    pub fn silent_formulas_and_figures(&self) -> (usize, usize) {
        let told =
            |d: &Dictionary| d.get(b"Alt").is_ok_and(|alt| !decoded(self.follow(alt)).trim().is_empty());
        let formulas = self.structure().filter(|(name, _)| *name == b"Formula").count();
        let silent = self
            .structure()
            .filter(|(name, d)| [&b"Formula"[..], b"Figure"].contains(name) && !told(d))
            .count();
        (formulas, silent)
    }

    pub fn alternatives(&self) -> Vec<String> {
        self.structure()
            .filter_map(|(_, d)| d.get(b"Alt").ok())
            .map(|alt| decoded(self.follow(alt)))
            .collect()
    }

    pub fn attached(&self) -> Vec<Attached> {
        let files = self.dictionaries().filter(|(_, d)| d.has(b"EF"));
        files
            .map(|(_, d)| {
                let streams = self.follow(d.get(b"EF").expect("checked")).as_dict().expect("a dictionary");
                let stream = self.follow(streams.get(b"F").expect("a file")).as_stream().expect("a stream");
                let name = |o: &Object| String::from_utf8_lossy(o.as_name().expect("a name")).into_owned();
                Attached {
                    name: decoded(self.follow(d.get(b"UF").expect("a name"))),
                    mime: name(stream.dict.get(b"Subtype").expect("a type")),
                    relationship: name(d.get(b"AFRelationship").expect("a relationship")),
                    bytes: stream.decompressed_content().unwrap_or_else(|_| stream.content.clone()),
                }
            })
            .collect()
    }

    /// Titles of all bookmarks.
    pub fn outline(&self) -> Vec<String> {
        let entries = self.dictionaries().filter(|(_, d)| d.has(b"Title") && d.has(b"Parent"));
        entries.map(|(_, d)| decoded(self.follow(d.get(b"Title").expect("checked")))).collect()
    }
}

/// A text string of the file: UTF-16 with a mark, or one byte a character.
fn decoded(object: &Object) -> String {
    let bytes = object.as_str().expect("a string");
    match bytes {
        [0xfe, 0xff, rest @ ..] => {
            let units: Vec<u16> =
                rest.chunks_exact(2).map(|pair| u16::from_be_bytes([pair[0], pair[1]])).collect();
            words(&String::from_utf16_lossy(&units))
        }
        other => words(&String::from_utf8_lossy(other)),
    }
}

/// Runs of any white space as one space, places to break left out.
fn words(text: &str) -> String {
    let text: String = text.chars().filter(|c| *c != '\u{200b}').collect();
    text.split_whitespace().collect::<Vec<_>>().join(" ")
}
