"""Which decoder reads a link's lines; a new line form enters here."""

from eastfall.io.columns import ColumnsDecoder
from eastfall.io.decoded import Decoded, Decoder
from eastfall.io.iec61162 import SentenceDecoder
from eastfall.io.sitefile import LinkSettings

__all__ = ["Decoded", "Decoder", "decoder_for"]


def decoder_for(settings: LinkSettings) -> Decoder:
    """Return a fresh decoder for a link.

    Parameters
    ----------
    settings : LinkSettings
        Form, columns, delimiter, checksum and decimal sign.

    Raises
    ------
    ParameterError
        The columns or the delimiter cannot be used.
    """
    if settings.form == "iec61162":
        return SentenceDecoder(settings.columns)
    return ColumnsDecoder(settings.columns, settings.delimiter, settings.checksum, settings.decimal)
