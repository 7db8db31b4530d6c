"""Domain names to ASCII: UTS 46 processing as the WHATWG URL standard asks for it.

The settings are CheckHyphens, UseSTD3ASCIIRules, VerifyDnsLength and Transitional_Processing = false,
CheckBidi and CheckJoiners = true. The package `idna` supplies the mapping table, the Bidi Rule and the
joiner rules; its `encode` cannot be used, because it refuses names the web uses (`a_b`, `r3---x`).

Source: URL Standard, section 3.3 "IDNA"; Unicode Technical Standard 46, sections 4 to 4.2.
"""

import re
import unicodedata

import idna

_SURROGATES = re.compile("[\ud800-\udfff]")

# Punycode arithmetic grows with the square of the label, so longer input is not even mapped. `idna`
# refuses the same length. A name has at most 253 characters, so only ignored characters could matter.
MAX_INPUT_CHARACTERS = 1024


def domain_to_ascii(domain: str) -> str | None:
    """ASCII form of a domain of at most `MAX_INPUT_CHARACTERS`, or None where UTS 46 reports an error.

    Empty labels and characters such as `_`, `%` or `<` pass: which of them a host may carry is the
    caller's question.
    """
    if domain.isascii():
        mapped = domain.lower()
        if "xn--" not in mapped:
            return mapped
    else:
        try:
            mapped = idna.uts46_remap(_SURROGATES.sub("\ufffd", domain), std3_rules=False)
        except idna.IDNAError:
            return None
    labels = mapped.split(".")
    decoded = [_decode_label(label) for label in labels]
    if any(text is None for text in decoded):
        return None
    unicode_labels = [text for text in decoded if text]
    if any(not _is_valid_label(text) for text in unicode_labels) or not _bidi_holds(unicode_labels):
        return None
    return ".".join(
        label if label.isascii() else "xn--" + label.encode("punycode").decode("ascii") for label in labels
    )


def _decode_label(label: str) -> str | None:
    """The Unicode form of a mapped label, or None where its `xn--` form is not what an encoder writes."""
    if not label.startswith("xn--"):
        return label
    body = label[4:]
    try:
        text = body.encode("ascii").decode("punycode")
        # Decoders accept several spellings of one label; only the encoder's own names the host.
        canonical = text != "" and not text.isascii() and text.encode("punycode") == body.encode("ascii")
    except (UnicodeError, ValueError, OverflowError):
        return None
    return text if canonical else None


def _is_valid_label(label: str) -> bool:
    """The validity criteria of UTS 46, section 4.1, but for the Bidi Rule, which needs the whole name."""
    if label.isascii():
        return not label.startswith("xn--")
    if label.startswith("xn--") or "." in label or unicodedata.category(label[0]).startswith("M"):
        return False
    try:
        if idna.uts46_remap(label, std3_rules=False) != label:  # every character valid, the whole in NFC
            return False
        return all(idna.valid_contextj(label, at) for at, char in enumerate(label) if char in "\u200c\u200d")
    except (idna.IDNAError, ValueError):  # ValueError: a neighbour of the joiner has no Unicode name
        return False


def _bidi_holds(labels: list[str]) -> bool:
    """True unless some character runs right to left and some label breaks the Bidi Rule (RFC 5893)."""
    if not any(unicodedata.bidirectional(char) in ("R", "AL", "AN") for label in labels for char in label):
        return True
    try:
        return all(idna.check_bidi(label, check_ltr=True) for label in labels)
    except idna.IDNAError:
        return False
