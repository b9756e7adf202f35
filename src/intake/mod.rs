//! Intake: bytes of a raw file to typed fragments and findings.
