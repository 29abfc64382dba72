"""Shared generators: sentences, streams with rubbish in them, cuts."""

from __future__ import annotations

import itertools
from functools import reduce
from operator import xor

from hypothesis import strategies as st


def checksum(text: bytes) -> bytes:
    """Two hex digits."""
    return b"%02X" % reduce(xor, text, 0)


def line(body: str) -> bytes:
    """The body as a sentence with its checksum and CR LF."""
    text = body.encode("latin-1")
    return b"$" + text + b"*" + checksum(text) + b"\r\n"


def maybe(text: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
    """A field that may be empty."""
    return st.one_of(st.just(""), text)


def decimal(low: int, high: int, most: int = 4) -> st.SearchStrategy[str]:
    """A decimal number between two whole ones, with up to ``most`` decimals, written as receivers do."""
    return st.builds(
        lambda whole, digits, sign: f"{sign if low < 0 else ''}{whole}" + (f".{digits}" if digits else ""),
        st.integers(max(low, 0), high),
        st.text("0123456789", max_size=most),
        st.sampled_from(["", "-"]),
    )


TIMES = st.builds(
    lambda h, m, s, f: f"{h:02d}{m:02d}{s:02d}" + (f".{f}" if f else ""),
    st.integers(0, 23),
    st.integers(0, 59),
    st.integers(0, 59),
    st.text("0123456789", min_size=1, max_size=3),
)
LATITUDES = st.builds(
    lambda d, m, f: f"{d:02d}{m:02d}.{f}",
    st.integers(0, 89),
    st.integers(0, 59),
    st.text("0123456789", min_size=2, max_size=9),
)
LONGITUDES = st.builds(
    lambda d, m, f: f"{d:03d}{m:02d}.{f}",
    st.integers(0, 179),
    st.integers(0, 59),
    st.text("0123456789", min_size=2, max_size=9),
)
COMMON = ("GGA", "RMC", "GLL", "GSA", "GSV", "GST", "VTG", "ZDA", "GNS", "GBS", "GRS", "HDT", "THS", "DTM", "TXT")
TALKERS = st.sampled_from(["GP", "GL", "GA", "GB", "GN", "GQ", "GI", "BD", "QZ", "PQ"])


@st.composite
def places(draw: st.DrawFn) -> str:
    """Latitude and longitude with their letters, or four empty fields."""
    if draw(st.integers(0, 9)) == 0:
        return ",,,"
    letters = draw(st.sampled_from("NS")), draw(st.sampled_from("EW"))
    return f"{draw(LATITUDES)},{letters[0]},{draw(LONGITUDES)},{letters[1]}"


@st.composite
def bodies(draw: st.DrawFn, formatter: str | None = None) -> str:
    """A sentence's text between start character and ``*``: a random one of the common formatters, or the one named."""
    kind = formatter or draw(st.sampled_from(COMMON))
    talker, time, place = draw(TALKERS), draw(maybe(TIMES)), draw(places())
    number = lambda low, high, most=4: draw(maybe(decimal(low, high, most)))  # noqa: E731 - a local shorthand
    if kind == "GGA":
        quality, used = draw(maybe(st.sampled_from("012345678"))), number(0, 40, 0)
        return (
            f"{talker}GGA,{time},{place},{quality},{used},{number(0, 99)},{number(-100, 9000)},M,{number(-90, 90)},M,"
            f"{number(0, 60, 1)},{draw(maybe(st.just('0101')))}"
        )
    if kind == "RMC":
        day = draw(maybe(st.builds("{:02d}{:02d}{:02d}".format, *map(st.integers, (1, 1, 0), (28, 12, 99)))))
        tail = draw(st.sampled_from([",A", ",A,V", ""]))
        variation = draw(st.sampled_from([",", "3.4,W", "0.1,E"]))
        return (
            f"{talker}RMC,{time},{draw(st.sampled_from('AV'))},{place},{number(0, 99)},{number(0, 359)},{day},"
            f"{variation}{tail}"
        )
    if kind == "GLL":
        return f"{talker}GLL,{place},{time},{draw(st.sampled_from('AV'))}{draw(st.sampled_from(['', ',A', ',N']))}"
    if kind == "GNS":
        modes = draw(maybe(st.text("NADPRFEMS", min_size=1, max_size=6)))
        return (
            f"{talker}GNS,{time},{place},{modes},{number(0, 40, 0)},{number(0, 99)},{number(-100, 9000)},"
            f"{number(-90, 90)},{number(0, 60, 1)},{draw(maybe(st.just('0101')))}{draw(st.sampled_from(['', ',V']))}"
        )
    if kind == "GBS":
        tail = draw(st.sampled_from(["", ",1,0", ",3,7", ",,"]))
        return (
            f"{talker}GBS,{time},{number(0, 99)},{number(0, 99)},{number(0, 99)},{number(0, 99, 0)},{number(0, 1)},"
            f"{number(-99, 99)},{number(0, 9)}{tail}"
        )
    if kind == "GRS":
        residuals = ",".join(number(-999, 999) for _ in range(12))
        return (
            f"{talker}GRS,{time},{draw(st.sampled_from('01'))},{residuals}{draw(st.sampled_from(['', ',1,1', ',4,B']))}"
        )
    if kind == "HDT":
        return f"{talker}HDT,{number(0, 359)},T"
    if kind == "THS":
        return f"{talker}THS,{number(0, 359)},{draw(st.sampled_from('AEMSV'))}"
    if kind == "DTM":
        datum = draw(maybe(st.sampled_from(["W84", "P90", "999"])))
        return f"{talker}DTM,{datum},,{number(0, 9)},N,{number(0, 9)},E,{number(-99, 99)},W84"
    if kind == "TXT":
        text = draw(st.text("ABCabc123 =:;.-_/^+()#%&'\"", max_size=61))
        return f"{talker}TXT,01,01,{draw(st.sampled_from(['00', '02', '07']))},{text}"
    if kind == "GSA":
        used = [draw(maybe(st.integers(1, 336).map(lambda n: f"{n:02d}"))) for _ in range(12)]
        system = draw(st.sampled_from(["", ",1", ",4"]))
        return f"{talker}GSA,A,3,{','.join(used)},{number(0, 9)},{number(0, 9)},{number(0, 9)}{system}"
    if kind == "GSV":
        groups = [
            f"{draw(st.integers(1, 99)):02d},{number(0, 90, 0)},{number(0, 359, 0)},{number(0, 99, 0)}"
            for _ in range(draw(st.integers(0, 4)))
        ]
        tail = draw(st.sampled_from(["", ",1", ",8"]))
        return f"{talker}GSV,3,1,09{''.join(',' + group for group in groups)}{tail}"
    if kind == "GST":
        return f"{talker}GST,{time}," + ",".join(number(0, 99) for _ in range(7))
    if kind == "VTG":
        mode = draw(st.sampled_from(["", ",A", ",N"]))
        return f"{talker}VTG,{number(0, 359)},T,{number(0, 359)},M,{number(0, 99)},N,{number(0, 99)},K{mode}"
    return f"{talker}ZDA,{time},{draw(st.integers(1, 28)):02d},{draw(st.integers(1, 12)):02d},2026,00,00"


RUBBISH = st.one_of(
    st.binary(max_size=40),
    st.sampled_from(
        [
            b"$",
            b"$$$",
            b"*",
            b"$GPGGA,1*",
            b"$GPGGA,092725.00,4717.1",
            b"\r\n",
            b"\n\n",
            b"\xd3\x00\x13\x3e\xd0$GP\x00\n",
            b"!AIVDM,1,1,,B,x,0*00\r\n",
            b"\\s:HE0002,c:1474107266,n:5*20\\",
            b"2026-03-01T00:00:01.002Z ",
            b"1699400577561 ",
            b"\x1b[31m",
            b"x" * 5000,
        ]
    ),
)


@st.composite
def streams(draw: st.DrawFn) -> bytes:
    """Sentences with anything between them: good ones, damaged ones, binary, text."""
    parts = draw(st.lists(st.one_of(bodies().map(line), RUBBISH), max_size=14))
    return b"".join(parts)


@st.composite
def long_lines(draw: st.DrawFn) -> bytes:
    """Lines of thousands of bytes, with sentences, stamps and starts near where they have to be broken."""
    near = st.integers(-90, 30).map(lambda n: b"x" * (4096 + n))
    pieces = st.one_of(
        near,
        st.integers(0, 1100).map(lambda n: b"y" * n),
        bodies().map(lambda body: line(body)[:-2]),
        bodies().map(line),
        st.sampled_from(
            [b" 1699400577561 ", b"NMEA,", b"$", b"!", b"\\c:1241544035*5C\\", b"$GPGGA,0927", b"*5B", b"\r"]
        ),
    )
    return b"".join(draw(st.lists(pieces, min_size=1, max_size=9)))


@st.composite
def cut(draw: st.DrawFn, data: bytes) -> list[bytes]:
    """The data in pieces, some of them empty."""
    places_ = sorted(draw(st.lists(st.integers(0, len(data)), max_size=8)))
    edges = [0, *places_, len(data)]
    return [data[a:b] for a, b in itertools.pairwise(edges)]
