"""The greeting as a sequence: hello, the information pages, the settings' pages, and what each answer leads to.

`Greeter.take` returns the requests that come next (none while others are still outstanding), the complete `Greeting`,
or `Ended` with the reason why there will be none.  A `Greeting` without settings is still one: the MCU can be
observed, lowered, cut and commissioned, but not armed.
"""

from hvhost.wire.events import Ended, EndWhy
from hvhost.wire.frames import Asked, Get, Hello, Info, Ok, Refusal
from hvhost.wire.greeting import INFO_PAGES, Greeting, info_of, read_page, read_settings_page, settings_of_pages
from hvhost.wire.settings import PAGES
from hvhost.wire.vocabulary import PROTOCOL_VERSION, Err
from hvhost.words.errors import WireFault

WHY: dict[str, EndWhy] = {Err.VERSION: EndWhy.VERSION, Err.SESSION: EndWhy.SESSION}


class Greeter:
    """Collects the pages of one greeting and judges each."""

    __slots__ = ("_fields", "_lease_ms", "_session", "_values")

    def __init__(self, session: int, lease_ms: int) -> None:
        self._session, self._lease_ms = session, lease_ms
        self._fields: dict[str, str | int] = {}
        self._values: tuple[int, ...] = ()

    def hello(self) -> Hello:
        """Return the opening request."""
        return Hello(version=PROTOCOL_VERSION, lease_ms=self._lease_ms)

    def take(self, asked: Asked, answer: Ok | Refusal) -> tuple[Asked, ...] | Greeting | Ended:
        """Take the answer to one of the greeting's requests."""
        if isinstance(answer, Refusal):
            why = WHY.get(answer.code, EndWhy.REFUSED)
            return Ended(why, f"{answer.verb} was refused: {answer.code}")
        try:
            if isinstance(asked, Hello):
                return self._opened(answer)
            if isinstance(asked, Info):
                return self._informed(asked.page, answer)
            return self._settled(asked.page if isinstance(asked, Get) else -1, answer)
        except WireFault as fault:
            return Ended(EndWhy.MALFORMED, str(fault))

    def _opened(self, answer: Ok) -> tuple[Asked, ...] | Ended:
        if answer.words[:1] != (str(PROTOCOL_VERSION),):
            return Ended(EndWhy.VERSION, f"expected {PROTOCOL_VERSION}, found {' '.join(answer.words[:1])}")
        if answer.words[1:2] != (str(self._lease_ms),):
            raise WireFault(f"a lease of {self._lease_ms} ms", " ".join(answer.words[1:]), "hello")
        return tuple(Info(page=page) for page in range(INFO_PAGES))

    def _informed(self, page: int, answer: Ok) -> tuple[Asked, ...] | Greeting | Ended:
        if answer.words != (str(page),):
            raise WireFault(f"page {page}", " ".join(answer.words), "info")
        self._fields |= read_page(answer)
        if page < INFO_PAGES - 1:
            return ()
        if self._fields["proto"] != PROTOCOL_VERSION:
            return Ended(EndWhy.VERSION, f"expected {PROTOCOL_VERSION}, found {self._fields['proto']}")
        if self._fields["blank"]:
            return self._greeting("the settings are blank or damaged")
        return tuple(Get(page=page) for page in range(PAGES))

    def _settled(self, page: int, answer: Ok) -> tuple[Asked, ...] | Greeting:
        self._values += read_settings_page(answer, page)
        return () if page < PAGES - 1 else self._greeting("")

    def _greeting(self, why_none: str) -> Greeting:
        settings = None
        if not why_none:
            try:
                settings = settings_of_pages(self._values, int(self._fields["settings"]))
            except WireFault as fault:
                why_none = str(fault)
        return Greeting(session=self._session, lease_s=self._lease_ms / 1000, info=info_of(self._fields),
                        settings=settings, why_none=why_none)
