"""Bytes and files: links, decoding, site file, run log, exports, report and the emulator."""
