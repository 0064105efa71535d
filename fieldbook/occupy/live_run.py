"""Recording a live link: a port, a socket or the simulated receiver, read by a thread, committed burst by burst."""

from __future__ import annotations

from fieldbook import __version__
from fieldbook.errors import LinkError
from fieldbook.model.item import ItemKind
from fieldbook.occupy.arrivals import Arrivals
from fieldbook.occupy.reader_thread import ReaderThread
from fieldbook.occupy.run import WAIT_S, Run
from fieldbook.occupy.source_warnings import WARNINGS, finding_of

SENSELESS_MS, SENSELESS_BYTES = 5_000, 200


class LiveRun(Run):
    """A port, a socket or the simulated receiver: read by a thread, committed burst by burst."""

    def go(self) -> str | None:
        self._started_ms = self._clock.monotonic_ms()
        self._arrivals = Arrivals(self._clock)
        self._reader = ReaderThread(self._link, self._address, self._arrivals, self._clock)
        if self.resumed:
            self._arrivals.add_event(ItemKind.STARTED, __version__)
        self._arrivals.add_event(ItemKind.REOPENED if self.resumed else ItemKind.OPENED, self._address.text)
        self._reader.start()  # before restoring: what comes meanwhile waits in memory
        self._wishes.on_start()
        self._begin()
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
        self._alarm("disk_too_slow", arrivals.dropping, "DISK TOO SLOW: received bytes are being lost.")
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

    def _alarm(self, code: str, on: bool, text: str) -> None:
        alarms = self._writer.state.alarms
        if on and code not in alarms:
            alarms.append(code)
            self._writer.append("alarm", code=code, text=text, acknowledged=False)
        elif not on and code in alarms:
            alarms.remove(code)
