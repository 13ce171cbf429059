//! Large pages, for benches: the package's own states ask for them where they are allocated, in Python.

/// Asks the system for large pages before the memory is touched. Without, the sweep of a state takes up to twice as long.
#[cfg(target_os = "linux")]
pub fn ask_for_large_pages<T>(room: &mut [T]) {
    unsafe extern "C" {
        fn madvise(start: *mut std::ffi::c_void, bytes: usize, advice: i32) -> i32;
    }
    const HUGE_PAGE: i32 = 14;
    const PAGE: usize = 4096;
    let first = room.as_ptr().align_offset(PAGE).min(room.len());
    let inside = &mut room[first..];
    // SAFETY: the advice changes no content, and the range is memory of this slice. A refusal costs time only.
    unsafe { madvise(inside.as_mut_ptr().cast(), size_of_val(inside), HUGE_PAGE) };
}

/// Elsewhere nothing is asked for.
#[cfg(not(target_os = "linux"))]
pub fn ask_for_large_pages<T>(_room: &mut [T]) {}
