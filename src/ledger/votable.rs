//! Tables as VOTable, the open format of astronomical tables: VOTable 1.4 in its TABLEDATA form
//! (IVOA Recommendation 2019-10-21).

use std::io::{self, BufWriter, Write};

use quick_xml::Writer;
use quick_xml::events::{BytesDecl, BytesEnd, BytesStart, BytesText, Event};
use serde_json::Value;

const NAMESPACE: &str = "http://www.ivoa.net/xml/VOTable/v1.3";

/// What a column holds, in the words of the format.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Datatype {
    Long,
    Double,
    Text,
}

/// A table being written.
pub(super) struct Votable<W: Write> {
    xml: Writer<BufWriter<W>>,
}

impl<W: Write> Votable<W> {
    /// Writes all that stands before the rows.
    pub(super) fn begin(
        file: BufWriter<W>,
        table: &str,
        columns: &[(&str, Datatype)],
    ) -> io::Result<Self> {
        let mut xml = Writer::new(file);
        xml.write_event(Event::Decl(BytesDecl::new("1.0", Some("UTF-8"), None)))?;
        let mut root = BytesStart::new("VOTABLE");
        root.push_attribute(("version", "1.4"));
        root.push_attribute(("xmlns", NAMESPACE));
        xml.write_event(Event::Start(root))?;
        xml.write_event(Event::Start(BytesStart::new("RESOURCE")))?;
        let mut start = BytesStart::new("TABLE");
        start.push_attribute(("name", table));
        xml.write_event(Event::Start(start))?;
        for (name, datatype) in columns {
            let mut field = BytesStart::new("FIELD");
            field.push_attribute(("name", *name));
            match datatype {
                Datatype::Long => field.push_attribute(("datatype", "long")),
                Datatype::Double => field.push_attribute(("datatype", "double")),
                Datatype::Text => {
                    field.push_attribute(("datatype", "unicodeChar"));
                    field.push_attribute(("arraysize", "*"));
                }
            }
            xml.write_event(Event::Empty(field))?;
        }
        xml.write_event(Event::Start(BytesStart::new("DATA")))?;
        xml.write_event(Event::Start(BytesStart::new("TABLEDATA")))?;
        Ok(Votable { xml })
    }

    /// Writes a row; an absent value is an empty cell.
    pub(super) fn row(&mut self, values: &[Value]) -> io::Result<()> {
        self.xml.get_mut().write_all(b"\n")?;
        self.xml.write_event(Event::Start(BytesStart::new("TR")))?;
        for value in values {
            let text = match value {
                Value::Null => {
                    self.xml.write_event(Event::Empty(BytesStart::new("TD")))?;
                    continue;
                }
                Value::String(text) => text.chars().map(allowed).collect(),
                other => other.to_string(),
            };
            self.xml.write_event(Event::Start(BytesStart::new("TD")))?;
            self.xml.write_event(Event::Text(BytesText::new(&text)))?;
            self.xml.write_event(Event::End(BytesEnd::new("TD")))?;
        }
        self.xml.write_event(Event::End(BytesEnd::new("TR")))
    }

    /// Writes all that stands behind the rows and gives the file back.
    pub(super) fn end(mut self) -> io::Result<BufWriter<W>> {
        for name in ["TABLEDATA", "DATA", "TABLE", "RESOURCE", "VOTABLE"] {
            self.xml.write_event(Event::End(BytesEnd::new(name)))?;
        }
        self.xml.get_mut().write_all(b"\n")?;
        Ok(self.xml.into_inner())
    }
}

/// XML 1.0, §2.2, has no way to write most control characters; a mark stands in their place.
fn allowed(c: char) -> char {
    match c {
        '\t' | '\n' | '\r' => c,
        '\u{0}'..'\u{20}' | '\u{FFFE}' | '\u{FFFF}' => char::REPLACEMENT_CHARACTER,
        c => c,
    }
}
