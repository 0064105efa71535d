"""Recording a live link: a port, a socket or the simulated receiver, read by a thread, committed burst by burst."""

from __future__ import annotations

from fieldbook import __version__
from fieldbook.errors import LinkError
from fieldbook.model.item import Item, ItemKind
from fieldbook.occupy.arrivals import Arrivals
from fieldbook.occupy.reader_thread import ReaderThread
from fieldbook.occupy.restore import Meanwhile
from fieldbook.occupy.run import DISK_TOO_SLOW, WAIT_S, Run
from fieldbook.occupy.source_warnings import WARNINGS, finding_of

SENSELESS_MS, SENSELESS_BYTES = 5_000, 200
MEANWHILE_MS = 100


class LiveRun(Run):
    """A port, a socket or the simulated receiver: read by a thread, committed burst by burst."""

    def go(self) -> str | None:
        self._started_ms, self._taken_ms = self._clock.monotonic_ms(), 0
        self._arrivals = Arrivals(self._clock)
        self._reader = ReaderThread(self._link, self._address, self._arrivals, self._clock)
        meanwhile = None
        if self.resumed:
            start = self._arrivals.add_event(ItemKind.STARTED, __version__)
            meanwhile = Meanwhile(start, self._take_meanwhile)
        self._arrivals.add_event(ItemKind.REOPENED if self.resumed else ItemKind.OPENED, self._address.text)
        self._reader.start()  # before restoring: nothing that comes meanwhile is missed
        self._wishes.on_start()
        self._begin(meanwhile)
        wanted = self._loop()
        self._reader.stop()
        rest = self._arrivals.take(0, all_of_it=True)
        while rest:
            self._writer.write(rest)
            rest = self._arrivals.take(0, all_of_it=True)
        if wanted == "leave":
            self._leave()
            return None
        self._end(wanted)
        return wanted

    def _take_meanwhile(self) -> list[Item]:
        """What has arrived while the past is decoded, ten times a second."""
        now = self._clock.monotonic_ms()
        if now - self._taken_ms < MEANWHILE_MS:
            return []
        self._taken_ms = now
        return self._arrivals.take(0)

    def close(self) -> None:
        if hasattr(self, "_reader") and self._reader.ident is not None:
            self._reader.stop()  # the reader closes its link itself
        else:
            self._link.close()

    def _loop(self) -> str:
        while True:
            items = self._arrivals.take(WAIT_S)
            self._note_link()
            if items:
                self._writer.write(items)
            else:
                self._writer.seal_if_due()
                if self._arrivals.ended:
                    return self._over()
            self._show()
            wanted = self._wanted()
            if wanted is not None:
                return wanted

    def _over(self) -> str:
        if self._reader.link_state == "ended":
            return "end of file"
        raise LinkError(
            f"The link {self._address.text} was lost for good: its reader stopped.",
            "Run the same command again: the occupation is open and goes on.",
            code="lost",
        )

    def _note_link(self) -> None:
        state, arrivals = self._writer.state, self._arrivals
        state.last_byte_utc_ms = arrivals.last_byte_utc_ms
        state.waiting_bytes, state.dropped_bytes = arrivals.waiting_bytes, arrivals.dropped_bytes
        self._alarm(DISK_TOO_SLOW, arrivals.dropping, "DISK TOO SLOW: received bytes are being lost.")
        warnings = set(self._writer.decoder.warnings)
        if self._makes_no_sense():
            warnings.add("no_valid_nmea")
        for code in sorted(warnings | set(WARNINGS).intersection(state.alarms)):
            self._alarm(code, code in warnings, finding_of(code)[1])
        if (state.link_state, state.link_reason) != (self._reader.link_state, self._reader.link_reason):
            state.link_state, state.link_reason = self._reader.link_state, self._reader.link_reason
            self._writer.show_state(now=True)

    def _makes_no_sense(self) -> bool:
        """Bytes have come for five seconds, and not one valid sentence among them."""
        if self._writer.decoder.sentences or self._writer.heard.received_bytes < SENSELESS_BYTES:
            return False
        return self._clock.monotonic_ms() - self._started_ms >= SENSELESS_MS
