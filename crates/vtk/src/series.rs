//! Time series: a PVD collection file that lists frames and their times.

use quick_xml::events::{BytesDecl, Event};
use quick_xml::{Reader, Writer};
use std::io::{self, Write};
use std::path::{Component, Path, PathBuf};

use crate::read::{Limits, attribute, read_file, xml_error};
use crate::{VtkError, atomic};

/// One frame of a series.
#[derive(Clone, Debug, PartialEq)]
pub struct SeriesEntry {
    /// Physical time, s.
    pub time: f64,
    /// File of the frame, relative to the folder of the collection file.
    pub file_name: String,
}

/// A PVD collection, kept on the disk as entries come and go.
///
/// The file is replaced in one step at each change, so it lists whole frames only, provided
/// that a frame's file is written before its entry is pushed. Times increase strictly, as
/// viewers treat equal times as parts of one frame.
#[derive(Debug)]
pub struct Series {
    path: PathBuf,
    entries: Vec<SeriesEntry>,
}

impl Series {
    /// Starts an empty series and writes its file, replacing one that exists.
    ///
    /// # Errors
    /// `Io` if the file cannot be written.
    pub fn create(path: impl Into<PathBuf>) -> Result<Self, VtkError> {
        let series = Self {
            path: path.into(),
            entries: Vec::new(),
        };
        series.store()?;
        Ok(series)
    }

    /// Opens a series written earlier. The frames' own files are not looked at.
    ///
    /// # Errors
    /// `Io`, or `InFile` with `LimitExceeded`, `Malformed`, `FileName` or `TimeOrder`.
    pub fn open(path: impl Into<PathBuf>, limits: &Limits) -> Result<Self, VtkError> {
        let path = path.into();
        let bytes = read_file(&path, limits)?;
        match parse(&bytes) {
            Ok(entries) => Ok(Self { path, entries }),
            Err(error) => Err(error.in_file(path)),
        }
    }

    /// The collection file.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// Entries in order of time.
    pub fn entries(&self) -> &[SeriesEntry] {
        &self.entries
    }

    /// Full path of a frame's file.
    pub fn frame_path(&self, file_name: &str) -> PathBuf {
        self.path.with_file_name("").join(file_name)
    }

    /// Whether a frame could be pushed: to find out before its file is written.
    ///
    /// # Errors
    /// `NonFiniteTime`, `TimeOrder`, or `FileName`.
    pub fn check(&self, time: f64, file_name: &str) -> Result<(), VtkError> {
        check(&self.entries, time, file_name)
    }

    /// Adds a frame, whose file should be complete by now, and rewrites the collection.
    /// On an error the series is as it was.
    ///
    /// # Errors
    /// `NonFiniteTime`, `TimeOrder`, `FileName`, or `Io`.
    pub fn push(&mut self, time: f64, file_name: impl Into<String>) -> Result<(), VtkError> {
        let file_name = file_name.into();
        self.check(time, &file_name)?;
        self.entries.push(SeriesEntry { time, file_name });
        self.store().inspect_err(|_| {
            self.entries.pop();
        })
    }

    /// Keeps the first `count` entries and returns the others, whose files the caller may
    /// want to remove. For going on from a checkpoint that is older than the last frame.
    ///
    /// # Errors
    /// `SeriesTooShort`, or `Io`; on an error the series is as it was.
    pub fn truncate(&mut self, count: usize) -> Result<Vec<SeriesEntry>, VtkError> {
        if count > self.entries.len() {
            return Err(VtkError::SeriesTooShort {
                wanted: count,
                present: self.entries.len(),
            });
        }
        let removed = self.entries.split_off(count);
        match self.store() {
            Ok(()) => Ok(removed),
            Err(error) => {
                self.entries.extend(removed);
                Err(error)
            }
        }
    }

    fn store(&self) -> Result<(), VtkError> {
        atomic::replace(&self.path, |file| write_collection(file, &self.entries))
    }
}

/// Name of a frame's file: `stem_000042.vtu`.
pub fn frame_file_name(stem: &str, index: usize) -> String {
    format!("{stem}_{index:06}.vtu")
}

fn check(entries: &[SeriesEntry], time: f64, file_name: &str) -> Result<(), VtkError> {
    if !time.is_finite() {
        return Err(VtkError::NonFiniteTime { time });
    }
    if let Some(last) = entries.last()
        && time <= last.time
    {
        let last = last.time;
        return Err(VtkError::TimeOrder { time, last });
    }
    // A frame outside the folder would be lost when the folder is moved, and a hostile
    // collection could point anywhere.
    let plain = !file_name.is_empty()
        && !file_name.contains(char::is_control)
        && Path::new(file_name)
            .components()
            .all(|part| matches!(part, Component::Normal(_)));
    if !plain {
        let file_name = file_name.to_owned();
        return Err(VtkError::FileName { file_name });
    }
    Ok(())
}

fn write_collection<W: Write>(file: W, entries: &[SeriesEntry]) -> io::Result<()> {
    let mut xml = Writer::new_with_indent(file, b' ', 1);
    xml.write_event(Event::Decl(BytesDecl::new("1.0", Some("UTF-8"), None)))?;
    xml.create_element("VTKFile")
        .with_attributes([
            ("type", "Collection"),
            ("version", "1.0"),
            ("byte_order", "LittleEndian"),
        ])
        .write_inner_content(|xml| {
            xml.create_element("Collection")
                .write_inner_content(|xml| {
                    for entry in entries {
                        // `{:?}` prints the shortest text that reads back as the same number.
                        xml.create_element("DataSet")
                            .with_attribute(("timestep", format!("{:?}", entry.time).as_str()))
                            .with_attribute(("part", "0"))
                            .with_attribute(("file", entry.file_name.as_str()))
                            .write_empty()?;
                    }
                    Ok(())
                })?;
            Ok(())
        })?;
    xml.into_inner().write_all(b"\n")
}

fn parse(bytes: &[u8]) -> Result<Vec<SeriesEntry>, VtkError> {
    let text = std::str::from_utf8(bytes)
        .map_err(|_| VtkError::malformed("collection", "the text is not UTF-8"))?;
    let mut reader = Reader::from_str(text);
    let mut entries = Vec::new();
    let mut is_collection = false;
    let mut closed = false;
    loop {
        match reader.read_event().map_err(xml_error)? {
            Event::Start(tag) | Event::Empty(tag) => match tag.name().as_ref() {
                "VTKFile" => {
                    let kind = attribute(&tag, "type")?;
                    is_collection = kind.as_deref() == Some("Collection");
                }
                "DataSet" => {
                    let missing = |name: &str| {
                        let at = format!("DataSet {}", entries.len());
                        VtkError::malformed(at, format!("the attribute {name} is missing or wrong"))
                    };
                    let time = attribute(&tag, "timestep")?
                        .and_then(|time| time.trim().parse().ok())
                        .ok_or_else(|| missing("timestep"))?;
                    let file_name = attribute(&tag, "file")?
                        .ok_or_else(|| missing("file"))?
                        .into_owned();
                    check(&entries, time, &file_name)?;
                    entries.push(SeriesEntry { time, file_name });
                }
                _ => {}
            },
            Event::End(tag) => closed |= tag.name().as_ref() == "VTKFile",
            Event::Eof => break,
            _ => {}
        }
    }
    if !is_collection || !closed {
        let problem = "this is no whole VTK collection (PVD) file";
        return Err(VtkError::malformed("VTKFile", problem));
    }
    Ok(entries)
}
