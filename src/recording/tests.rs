//! Recordings there and back, and recordings that are not what they should be.

use std::fs;
use std::path::Path;

use proptest::prelude::*;
use tempfile::TempDir;

use super::*;
use crate::frames::{Frame, FrameSource};
use crate::shape::Verdict;
use crate::units::Micros;

const SIZE: SizePx = SizePx {
    width_px: 16,
    height_px: 9,
};

fn frame(captured_us: i64, belt_mm: Option<f64>) -> Frame {
    Frame {
        width_px: SIZE.width_px,
        height_px: SIZE.height_px,
        pixels: (0..SIZE.pixels())
            .map(|at| (at as i64 * 7 + captured_us) as u8)
            .collect(),
        captured_us: Micros(captured_us),
        belt_mm,
    }
}

/// A good recording of three frames.
fn recorded() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    let mut writer = Writer::create(folder.path()).unwrap();
    for frame in [frame(5, Some(0.0)), frame(7, None), frame(9, Some(0.25))] {
        writer.write(&frame).unwrap();
    }
    folder
}

/// The message for a recording whose table is `rows` under the right header.
fn refused(rows: &str) -> String {
    let folder = recorded();
    let table = format!("file,captured_us,belt_mm\n{rows}");
    fs::write(folder.path().join("frames.csv"), table).unwrap();
    message(folder.path())
}

fn message(folder: &Path) -> String {
    let error = Recording::open(folder, Some(SIZE)).unwrap_err();
    let text = error.to_string();
    assert!(text.starts_with(folder.to_str().unwrap()), "{text}");
    assert!(!text.contains('\n'), "{text}");
    text[folder.to_str().unwrap().len()..].to_owned()
}

/// The message for a recording whose first frame is `bytes`.
fn refused_picture(bytes: &[u8]) -> String {
    let folder = recorded();
    fs::write(folder.path().join("000000.png"), bytes).unwrap();
    message(folder.path())
}

fn all_frames(recording: &Recording) -> Result<Vec<Frame>, RecordingError> {
    let mut playback = recording.play();
    let mut frame = Frame::default();
    let mut frames = Vec::new();
    while playback.next_into(&mut frame)? {
        frames.push(frame.clone());
    }
    Ok(frames)
}

#[test]
fn what_is_written_is_read_back() {
    let folder = recorded();
    let recording = Recording::open(folder.path(), None).unwrap();
    let want = vec![frame(5, Some(0.0)), frame(7, None), frame(9, Some(0.25))];
    assert_eq!(all_frames(&recording).unwrap(), want);
    assert_eq!((recording.len(), recording.size()), (3, SIZE));
    assert_eq!(recording.span_us(), (Micros(5), Micros(9)));
    assert_eq!(recording.labels().unwrap(), None);
    assert_eq!(recording.notes().unwrap(), None);
}

#[test]
fn the_buffer_is_used_again() {
    let folder = recorded();
    let recording = Recording::open(folder.path(), None).unwrap();
    let mut playback = recording.play();
    let mut frame = Frame {
        pixels: Vec::with_capacity(SIZE.pixels()),
        ..Frame::default()
    };
    let before = frame.pixels.as_ptr();
    while playback.next_into(&mut frame).unwrap() {
        assert_eq!(frame.pixels.as_ptr(), before);
    }
}

#[test]
fn labels_and_notes_are_read_back() {
    let folder = recorded();
    let labels = [
        (-12.5, 30.25, Verdict::Keep, ""),
        (
            40.125,
            90.0,
            Verdict::Reject,
            "tip \"broken\", twice\nreally",
        ),
    ]
    .map(|(along_mm, across_mm, verdict, note)| Label {
        along_mm,
        across_mm,
        verdict,
        note: note.to_owned(),
    });
    let mut writer = LabelWriter::create(folder.path()).unwrap();
    for label in &labels {
        writer.write(label).unwrap();
    }
    writer.finish().unwrap();
    assert!(LabelWriter::create(folder.path()).is_err());
    fs::write(folder.path().join("recording.toml"), "camera = \"left\"\n").unwrap();

    let recording = Recording::open(folder.path(), None).unwrap();
    assert_eq!(recording.labels().unwrap().unwrap(), labels);
    assert_eq!(
        recording.notes().unwrap().unwrap()["camera"].as_str(),
        Some("left")
    );
    fs::write(folder.path().join("recording.toml"), "camera = \n").unwrap();
    assert!(
        recording
            .notes()
            .unwrap_err()
            .to_string()
            .contains("TOML parse error at line 1")
    );
}

#[test]
fn a_table_saved_by_a_spreadsheet_is_read() {
    let folder = recorded();
    let table = "\u{feff}\"file\",\"captured_us\",\"belt_mm\"\r\n\"000000.png\",\"5\",\"1.5\"\r\n";
    fs::write(folder.path().join("frames.csv"), table).unwrap();
    let recording = Recording::open(folder.path(), Some(SIZE)).unwrap();
    assert_eq!(all_frames(&recording).unwrap()[0].belt_mm, Some(1.5));
}

#[test]
fn a_writer_that_is_cut_off_leaves_what_it_wrote() {
    let folder = tempfile::tempdir().unwrap();
    let mut writer = Writer::create(folder.path()).unwrap();
    for captured_us in 1..=4 {
        writer.write(&frame(captured_us, None)).unwrap();
        let recording = Recording::open(folder.path(), Some(SIZE)).unwrap();
        assert_eq!(all_frames(&recording).unwrap().len() as i64, captured_us);
    }
    // The crash came while the fifth picture was being written: it has no row yet.
    std::mem::forget(writer);
    fs::write(folder.path().join("000004.png"), b"\x89PNG").unwrap();
    assert_eq!(Recording::open(folder.path(), Some(SIZE)).unwrap().len(), 4);
}

#[test]
fn a_writer_refuses_what_a_reader_would() {
    let folder = tempfile::tempdir().unwrap();
    let mut writer = Writer::create(folder.path()).unwrap();
    writer.write(&frame(10, Some(3.0))).unwrap();
    let table = fs::read(folder.path().join("frames.csv")).unwrap();
    let mut narrow = frame(11, None);
    narrow.width_px -= 1;
    narrow
        .pixels
        .truncate(narrow.pixels.len() - SIZE.height_px as usize);
    let mut short = frame(11, None);
    short.pixels.pop();
    let mut none = frame(11, None);
    none.height_px = 0;
    for (bad, want) in [
        (frame(10, None), "captured_us is 10, expected more than 10"),
        (frame(-1, None), "captured_us is \"-1\""),
        (frame(11, Some(2.9)), "belt_mm is 2.9, expected at least 3"),
        (frame(11, Some(f64::NAN)), "belt_mm is \"NaN\""),
        (frame(11, Some(f64::INFINITY)), "belt_mm is \"inf\""),
        (narrow, "the picture is 15 x 9 px, expected 16 x 9 px"),
        (short, "the picture has 143 pixels, expected 144"),
        (none, "the picture is 16 x 0 px"),
    ] {
        let text = writer.write(&bad).unwrap_err().to_string();
        assert!(
            text.contains("frame 1 was not written") && text.contains(want),
            "{text}"
        );
    }
    assert_eq!(fs::read(folder.path().join("frames.csv")).unwrap(), table);
    writer.write(&frame(11, Some(3.0))).unwrap();
    assert_eq!(writer.frames(), 2);
}

#[test]
fn nothing_is_written_into_a_folder_in_use() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("holiday.jpg"), "").unwrap();
    let error = Writer::create(folder.path()).unwrap_err();
    assert!(error.to_string().contains("not empty"), "{error}");
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
    assert!(Writer::create(&folder.path().join("holiday.jpg")).is_err());
}

#[test]
fn a_folder_without_a_recording() {
    let folder = tempfile::tempdir().unwrap();
    assert!(message(folder.path()).starts_with("/frames.csv: cannot open it: "));
    fs::create_dir(folder.path().join("frames.csv")).unwrap();
    assert!(message(folder.path()).contains("not a plain file"));
}

#[test]
fn rows_that_are_wrong() {
    for (rows, want) in [
        ("", "/frames.csv: there is no frame in it"),
        (
            "000000.png,5\n",
            ":2: 2 values, expected 3: file, captured_us, belt_mm",
        ),
        ("000000.png,5,,\n", ":2: 4 values, expected 3"),
        (
            "000000.png,5,\n000001.png,4,\n",
            ":3: captured_us is 4, expected more than 5",
        ),
        (
            "000000.png,5,\n000001.png,5,\n",
            ":3: captured_us is 5, expected more than 5",
        ),
        (
            "000000.png,5.0,\n",
            ":2: captured_us is \"5.0\", expected a whole number",
        ),
        (
            "000000.png,-5,\n",
            ":2: captured_us is \"-5\", expected a whole number",
        ),
        (
            "000000.png,99999999999999999999,\n",
            "expected a whole number",
        ),
        (
            "000000.png,5,nan\n",
            ":2: belt_mm is \"nan\", expected a number",
        ),
        (
            "000000.png,5,inf\n",
            ":2: belt_mm is \"inf\", expected a number",
        ),
        (
            "000000.png,5,1e300\n",
            ":2: belt_mm is \"1e300\", expected a number",
        ),
        (
            "000000.png,5,\"1,5\"\n",
            ":2: belt_mm is \"1,5\", expected a number",
        ),
        (
            "000000.png,5,2\n000001.png,6,\n000002.png,7,1.9\n",
            ":4: belt_mm is 1.9, expected at least 2",
        ),
        (
            "/etc/hostname,5,\n",
            ":2: file is \"/etc/hostname\", expected a path inside",
        ),
        (
            "../000000.png,5,\n",
            ":2: file is \"../000000.png\", expected a path inside",
        ),
        (",5,\n", ":2: file is \"\", expected a path inside"),
        (
            "\"0\n0.png\",5,\n",
            ":2: file is \"0\\n0.png\", expected a path inside",
        ),
        ("000009.png,5,\n", "/000009.png: cannot open it"),
    ] {
        let text = refused(rows);
        assert!(text.contains(want), "{rows:?} gives {text:?}");
    }
}

#[test]
fn tables_that_are_none() {
    let folder = recorded();
    let table = folder.path().join("frames.csv");
    for (bytes, want) in [
        (
            &b""[..],
            ":1: the first line is \"\", expected \"file,captured_us,belt_mm\"",
        ),
        (
            b"file,captured_us\n",
            ":1: the first line is \"file,captured_us\"",
        ),
        (
            b"file;captured_us;belt_mm\n",
            ":1: the first line is \"file;captured_us;belt_mm\"",
        ),
        (
            b"File,captured_us,belt_mm\n",
            ":1: the first line is \"File,",
        ),
        (b"file,captured_us,belt_mm,gain\n", ":1: the first line is"),
        (
            b"file,captured_us,belt_mm\n\xff.png,5,\n",
            ":2: this line is not UTF-8 text",
        ),
        (b"\x89PNG\r\n\x1a\n", ":1: this line is not UTF-8 text"),
        (
            b"file,captured_us,belt_mm\n\"000000.png,5,\n",
            ":2: 1 values, expected 3",
        ),
    ] {
        fs::write(&table, bytes).unwrap();
        let text = message(folder.path());
        assert!(text.contains(want), "{text}");
    }
    fs::write(&table, "x".repeat(10_000)).unwrap();
    assert!(message(folder.path()).len() < 200);
    fs::File::create(&table)
        .unwrap()
        .set_len(MAX_TABLE_BYTES + 1)
        .unwrap();
    assert!(message(folder.path()).contains("67108865 bytes, and at most 67108864 are read"));
}

#[test]
fn label_tables_that_are_wrong() {
    let folder = recorded();
    let recording = Recording::open(folder.path(), None).unwrap();
    for (rows, want) in [
        (
            "1,2,perhaps,\n",
            ":2: verdict is \"perhaps\", expected keep or reject",
        ),
        ("1,2,keep,\n1,2,Keep,\n", ":3: verdict is \"Keep\""),
        ("NaN,2,keep,\n", ":2: along_mm is \"NaN\""),
        ("1,,keep,\n", ":2: across_mm is \"\""),
        ("1,2,keep\n", ":2: 3 values, expected 4"),
        ("1,2,keep,,\n", ":2: 5 values, expected 4"),
    ] {
        let table = format!("along_mm,across_mm,verdict,note\n{rows}");
        fs::write(folder.path().join("labels.csv"), table).unwrap();
        let text = recording.labels().unwrap_err().to_string();
        assert!(text.contains(want), "{text}");
    }
}

/// A picture of the expected size that is not 8-bit gray, made by an encoder that is not ours.
fn encoded(picture: image::DynamicImage) -> Vec<u8> {
    let mut bytes = std::io::Cursor::new(Vec::new());
    picture
        .write_to(&mut bytes, image::ImageFormat::Png)
        .unwrap();
    bytes.into_inner()
}

fn good_png() -> Vec<u8> {
    encoded(image::DynamicImage::new_luma8(16, 9))
}

#[test]
fn pictures_that_are_not_8_bit_gray() {
    use image::DynamicImage as Picture;
    let mut palette = good_png();
    palette[25] = 3;
    let mut coarse = good_png();
    coarse[24] = 4;
    let mut odd = good_png();
    odd[25] = 77;
    for (bytes, want) in [
        (encoded(Picture::new_luma16(16, 9)), "16-bit gray,"),
        (
            encoded(Picture::new_luma_a8(16, 9)),
            "8-bit gray with alpha,",
        ),
        (encoded(Picture::new_rgb8(16, 9)), "8-bit RGB,"),
        (
            encoded(Picture::new_rgba16(16, 9)),
            "16-bit RGB with alpha,",
        ),
        (palette, "8-bit palette,"),
        (coarse, "4-bit gray,"),
        (odd, "8-bit of an unknown colour type,"),
    ] {
        let text = refused_picture(&bytes);
        assert!(
            text.contains(&format!("the picture is {want} expected 8-bit gray")),
            "{text}"
        );
    }
}

#[test]
fn pictures_of_another_size() {
    let wide = encoded(image::DynamicImage::new_luma8(17, 9));
    assert!(refused_picture(&wide).contains("17 x 9 px, expected 16 x 9 px"));
    let folder = recorded();
    fs::write(folder.path().join("000002.png"), wide).unwrap();
    let error = Recording::open(folder.path(), None).unwrap_err();
    assert!(
        error
            .to_string()
            .contains("000002.png: the picture is 17 x 9 px"),
        "{error}"
    );
}

#[test]
fn pictures_that_are_none() {
    for bytes in [
        &b""[..],
        b"\x89PNG\r\n\x1a\n",
        b"GIF89a",
        &good_png()[..25],
        &[0; 64],
    ] {
        assert!(refused_picture(bytes).contains("not a PNG file"));
    }
    let folder = recorded();
    fs::remove_file(folder.path().join("000000.png")).unwrap();
    fs::create_dir(folder.path().join("000000.png")).unwrap();
    assert!(message(folder.path()).contains("/000000.png: this is not a plain file"));
}

/// Opening a named pipe for reading would wait for a writer that never comes.
#[cfg(unix)]
#[test]
fn a_named_pipe_does_not_hang_the_reader() {
    let folder = recorded();
    let pipe = folder.path().join("000000.png");
    fs::remove_file(&pipe).unwrap();
    let made = std::process::Command::new("mkfifo")
        .arg(&pipe)
        .status()
        .unwrap();
    assert!(made.success());
    assert!(message(folder.path()).contains("not a plain file"));
}

#[test]
fn headers_that_promise_too_much() {
    for (width_px, height_px) in [
        (10_000_u32, 10_000_u32),
        (u32::MAX, u32::MAX),
        (8193, 1),
        (0, 9),
        (16, 0),
    ] {
        let mut bytes = good_png();
        bytes[16..20].copy_from_slice(&width_px.to_be_bytes());
        bytes[20..24].copy_from_slice(&height_px.to_be_bytes());
        let text = refused_picture(&bytes);
        let want = format!("the picture says it is {width_px} x {height_px} px");
        assert!(text.contains(&want), "{text}");
    }
}

/// The header is whole, so this comes to light when the frame is read.
#[test]
fn a_picture_cut_off_anywhere_is_an_error() {
    let whole = fs::read(recorded().path().join("000000.png")).unwrap();
    let folder = recorded();
    let recording = Recording::open(folder.path(), Some(SIZE)).unwrap();
    // The last 12 bytes are the end mark, which holds no pixels.
    for length in 26..whole.len() - 12 {
        fs::write(folder.path().join("000000.png"), &whole[..length]).unwrap();
        let text = all_frames(&recording).unwrap_err().to_string();
        assert!(
            text.contains("000000.png: the picture is cut off or damaged"),
            "{text}"
        );
    }
}

#[test]
fn a_picture_changed_after_opening_is_checked_again() {
    let folder = recorded();
    let recording = Recording::open(folder.path(), Some(SIZE)).unwrap();
    fs::write(
        folder.path().join("000001.png"),
        encoded(image::DynamicImage::new_luma8(90, 90)),
    )
    .unwrap();
    let mut playback = recording.play();
    let mut frame = Frame::default();
    assert!(playback.next_into(&mut frame).unwrap());
    let text = playback.next_into(&mut frame).unwrap_err().to_string();
    assert!(text.contains("90 x 90 px, expected 16 x 9 px"), "{text}");
}

#[test]
fn damaged_bytes_never_pass_as_pixels() {
    let whole = fs::read(recorded().path().join("000000.png")).unwrap();
    let folder = recorded();
    let recording = Recording::open(folder.path(), Some(SIZE)).unwrap();
    // Signature to the last byte of the pixel data and its check sum.
    for at in 0..whole.len() - 12 {
        let mut bytes = whole.clone();
        bytes[at] ^= 0x10;
        fs::write(folder.path().join("000000.png"), bytes).unwrap();
        assert!(all_frames(&recording).is_err(), "byte {at}");
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(64))]

    /// A reading survives being written as decimals, to the last bit.
    #[test]
    fn readings_keep_their_bits(steps in proptest::collection::vec((1_i64..1 << 40, 0.0..1e6_f64), 1..5)) {
        let folder = tempfile::tempdir().unwrap();
        let mut writer = Writer::create(folder.path()).unwrap();
        let (mut captured_us, mut belt_mm) = (0, 0.0);
        let mut want = Vec::new();
        for (step_us, step_mm) in steps {
            captured_us += step_us;
            belt_mm += step_mm;
            want.push(frame(captured_us, Some(belt_mm)));
            writer.write(want.last().unwrap()).unwrap();
        }
        let recording = Recording::open(folder.path(), Some(SIZE)).unwrap();
        prop_assert_eq!(all_frames(&recording).unwrap(), want);
    }

    /// Whatever stands in the table: frames or one sentence, never a panic.
    #[test]
    fn any_table_is_read_or_refused(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
        let folder = recorded();
        fs::write(folder.path().join("frames.csv"), &bytes).unwrap();
        let _ = Recording::open(folder.path(), Some(SIZE));
        let mut table = b"file,captured_us,belt_mm\n".to_vec();
        table.extend(&bytes);
        fs::write(folder.path().join("frames.csv"), table).unwrap();
        if let Ok(recording) = Recording::open(folder.path(), Some(SIZE)) {
            prop_assert!(all_frames(&recording).is_ok());
        }
    }
}
