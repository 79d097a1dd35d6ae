"""What an instrument complains of: the numbers and texts of SCPI-1999 volume 2, chapter 21.8."""

TEXTS = {
    0: "No error",
    -101: "Invalid character",
    -102: "Syntax error",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -112: "Program mnemonic too long",
    -113: "Undefined header",
    -114: "Header suffix out of range",
    -120: "Numeric data error",
    -131: "Invalid suffix",
    -138: "Suffix not allowed",
    -141: "Invalid character data",
    -151: "Invalid string data",
    -168: "Block data not allowed",
    -170: "Expression error",
    -213: "Init ignored",
    -221: "Settings conflict",
    -222: "Data out of range",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -350: "Queue overflow",
    -363: "Input buffer overrun",
    -440: "Query UNTERMINATED after indefinite response",
}


class Complaint(Exception):  # noqa: N818  # it never leaves the twin: it becomes an entry of the error queue
    """A command cannot be parsed or executed; `code` goes into the error queue."""

    def __init__(self, code: int) -> None:
        self.code = code
        super().__init__(f"{code},{TEXTS[code]}")

    @property
    def is_of_syntax(self) -> bool:
        """Whether the rest of the message cannot be trusted either: a command error, -100 to -199."""
        return -200 < self.code <= -100
