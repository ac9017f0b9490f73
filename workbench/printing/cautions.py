"""What every report ends with: what the counts leave out, and who decides."""

CAUTIONS = """\
The counts leave out interrupts, what the compiler adds, and all that no tariff line prices. A bound is as good as its
tariff: confirm it on the target by measurement. In safety-related work the governing standard (for example IEC 61508-3,
ISO 26262-6, DO-178C) and the responsible, qualified person decide.
"""
