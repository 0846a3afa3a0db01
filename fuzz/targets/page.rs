//! A page that is read back.
#![no_main]

use libfuzzer_sys::fuzz_target;

fuzz_target!(|text: &str| {
    let page = format!("<script type=\"application/json\" id=\"gaptone-report\">{text}</script>");
    for page in [text, &page] {
        if let Err(error) = gaptone::page::extract(page) {
            assert!(!error.to_string().is_empty());
        }
    }
});
