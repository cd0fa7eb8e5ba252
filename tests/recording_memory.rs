//! However large a recording claims to be, reading it takes little memory.
//!
//! The allocator counts for the whole process, so everything stands in one test.

use std::alloc::{GlobalAlloc, Layout, System};
use std::fs;
use std::io::Cursor;
use std::path::Path;
use std::sync::atomic::{AtomicUsize, Ordering::Relaxed};

use beltwright::frames::{Frame, FrameSource};
use beltwright::recording::{MAX_TABLE_BYTES, Recording, RecordingError, SizePx};

struct Counting;

static NOW: AtomicUsize = AtomicUsize::new(0);
static PEAK: AtomicUsize = AtomicUsize::new(0);

// SAFETY: every call is handed on unchanged to the system's allocator; the counters do not touch memory.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        PEAK.fetch_max(
            NOW.fetch_add(layout.size(), Relaxed) + layout.size(),
            Relaxed,
        );
        // SAFETY: the caller keeps the same promises to us.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, at: *mut u8, layout: Layout) {
        NOW.fetch_sub(layout.size(), Relaxed);
        // SAFETY: as above.
        unsafe { System.dealloc(at, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// What `work` gives, and how many bytes it held at most.
fn peak_of<T>(work: impl FnOnce() -> T) -> (T, usize) {
    let before = NOW.load(Relaxed);
    PEAK.store(before, Relaxed);
    let result = work();
    (result, PEAK.load(Relaxed) - before)
}

/// PNG chunk with its check sum (ISO/IEC 15948, annex D).
fn chunk(name: &[u8; 4], data: &[u8]) -> Vec<u8> {
    let body = [name, data].concat();
    let mut crc = u32::MAX;
    for &byte in &body {
        crc ^= u32::from(byte);
        for _ in 0..8 {
            crc = if crc & 1 == 1 {
                crc >> 1 ^ 0xedb8_8320
            } else {
                crc >> 1
            };
        }
    }
    [
        &(data.len() as u32).to_be_bytes()[..],
        &body,
        &(!crc).to_be_bytes(),
    ]
    .concat()
}

/// A gray PNG that says it is `size`, with `before` in front of the pixel data `packed`.
fn png(size: SizePx, before: &[u8], packed: &[u8]) -> Vec<u8> {
    let sides = [size.width_px.to_be_bytes(), size.height_px.to_be_bytes()].concat();
    [
        b"\x89PNG\r\n\x1a\n".to_vec(),
        chunk(b"IHDR", &[&sides[..], &[8, 0, 0, 0, 0]].concat()),
        before.to_vec(),
        chunk(b"IDAT", packed),
        chunk(b"IEND", b""),
    ]
    .concat()
}

/// 64 MiB of zeros as a zlib stream, taken from the picture data that an encoder makes of them.
fn packed_zeros() -> Vec<u8> {
    let mut file = Cursor::new(Vec::new());
    let black = image::GrayImage::new(8192, 8192);
    let encoder = image::codecs::png::PngEncoder::new_with_quality(
        &mut file,
        image::codecs::png::CompressionType::Best,
        image::codecs::png::FilterType::NoFilter,
    );
    black.write_with_encoder(encoder).unwrap();
    let file = file.into_inner();
    let mut packed = Vec::new();
    let mut at = 8;
    while at < file.len() {
        let length = u32::from_be_bytes(file[at..at + 4].try_into().unwrap()) as usize;
        if &file[at + 4..at + 8] == b"IDAT" {
            packed.extend(&file[at + 8..at + 8 + length]);
        }
        at += length + 12;
    }
    packed
}

fn read_all(folder: &Path, expected: Option<SizePx>) -> Result<usize, RecordingError> {
    let recording = Recording::open(folder, expected)?;
    let mut playback = recording.play();
    let mut frame = Frame::default();
    let mut frames = 0;
    while playback.next_into(&mut frame)? {
        frames += 1;
    }
    Ok(frames)
}

const MIB: usize = 1 << 20;

#[test]
fn memory_stays_small_whatever_the_files_claim() {
    let folder = tempfile::tempdir().unwrap();
    let (table, picture) = (
        folder.path().join("frames.csv"),
        folder.path().join("a.png"),
    );
    let small = SizePx {
        width_px: 16,
        height_px: 16,
    };
    let huge = SizePx {
        width_px: 10_000,
        height_px: 10_000,
    };
    let zeros = packed_zeros();
    assert!(zeros.len() < MIB);
    fs::write(&table, "file,captured_us,belt_mm\na.png,1,\n").unwrap();

    fs::write(&picture, png(huge, b"", &zeros)).unwrap();
    let (read, peak) = peak_of(|| read_all(folder.path(), None));
    assert!(read.unwrap_err().to_string().contains("10000 x 10000"));
    assert!(peak < MIB, "a header of 100 megapixels took {peak} bytes");

    let text = [b"Comment\0\0", &zeros[..]].concat();
    let profile = [b"P\0\0", &zeros[..]].concat();
    for (what, before, packed) in [
        ("pixel data that never ends", Vec::new(), &zeros),
        ("a compressed text", chunk(b"zTXt", &text), &zeros),
        ("a colour profile", chunk(b"iCCP", &profile), &zeros),
    ] {
        fs::write(&picture, png(small, &before, packed)).unwrap();
        let (read, peak) = peak_of(|| read_all(folder.path(), Some(small)));
        println!("{what}: {read:?}, {peak} bytes at most");
        assert!(peak < 8 * MIB, "{what} took {peak} bytes");
    }

    fs::File::create(&table)
        .unwrap()
        .set_len(MAX_TABLE_BYTES + 1)
        .unwrap();
    let (read, peak) = peak_of(|| read_all(folder.path(), None));
    assert!(
        read.is_err() && peak < MIB,
        "a table that is too large took {peak} bytes"
    );

    // One row of the largest size that is read: the reader must hold it once, doubled while it grows.
    fs::write(&table, "x".repeat(MAX_TABLE_BYTES as usize)).unwrap();
    let (read, peak) = peak_of(|| read_all(folder.path(), None));
    println!("a table of one endless row: {peak} bytes at most");
    assert!(
        read.is_err() && peak < 6 * MAX_TABLE_BYTES as usize,
        "an endless row took {peak} bytes"
    );
}
