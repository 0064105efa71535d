"""Every example of the decoder's rules, fed whole, byte by byte, in random pieces, and with junk around it."""

from __future__ import annotations

from itertools import permutations

import pytest

from fieldbook.nmea.decoder import DecoderOptions

from .cases import CASES, Case
from .examples import EXAMPLES
from .feeding import balance, byte_by_byte, decoded, gga, random_pieces, rmc, sentence, snapshot, whole

JUNK_BEFORE = b"\x00\xff noise \\ * 47\r\n\xb5b\x01\x07"
JUNK_AFTER = b"\r\n*00 noise\x00\xd3\x00\x13\n"


def ids(case: Case) -> str:
    """The rule, and whether an option is on."""
    return case.rule if case.options == DecoderOptions() else f"{case.rule}-option"


@pytest.mark.parametrize("case", CASES, ids=ids)
def test_the_example_gives_what_the_rule_says(case: Case) -> None:
    epochs, decoder = decoded(EXAMPLES[case.rule][1], case.options)
    got = [{name: getattr(epoch, name) for name in want} for epoch, want in zip(epochs, case.epochs, strict=True)]
    assert got == case.epochs
    assert {name: decoder.counters.get(name, 0) for name in case.counts} == case.counts
    assert (decoder.day0, decoder.day0_source) == (case.day0, case.source)
    assert decoder.warnings == case.warnings
    if case.sky is not None:
        assert [(one.system, one.number, one.cn0_dbhz) for one in decoder.sky] == case.sky
    assert balance(decoder.counters) == 0


@pytest.mark.parametrize("case", CASES, ids=ids)
def test_however_it_is_cut_the_result_is_the_same(case: Case) -> None:
    data = EXAMPLES[case.rule][1]
    want = snapshot(decoded(data, case.options, whole))
    assert snapshot(decoded(data, case.options, byte_by_byte)) == want
    for seed in range(5):
        assert snapshot(decoded(data, case.options, random_pieces(seed))) == want


@pytest.mark.parametrize("case", CASES, ids=ids)
def test_junk_around_it_changes_nothing(case: Case) -> None:
    data = EXAMPLES[case.rule][1]
    noisy = JUNK_BEFORE + data + (JUNK_AFTER if case.may_be_followed else b"")
    want = snapshot(decoded(data, case.options))
    for cut in (whole, byte_by_byte, random_pieces(3)):
        got = snapshot(decoded(noisy, case.options, cut))
        assert {name: got[name] for name in got if name != "counters"} == {
            name: want[name] for name in want if name != "counters"
        }
        assert balance(got["counters"]) == 0


def test_every_example_has_a_case() -> None:
    assert {case.rule for case in CASES} == set(EXAMPLES)


@pytest.mark.parametrize("rule", ["C1", "C2"])
def test_all_six_orders_give_the_same_epoch(rule: str) -> None:
    lines = EXAMPLES[rule][1].splitlines(keepends=True)
    # the next epoch follows, so that the order is seen by an open group and not by the end alone
    following = gga("100202.00")
    results = []
    for order in permutations(lines):
        got = snapshot(decoded(b"".join(order) + following))
        results.append({name: got[name] for name in ("epochs", "day0", "day0_source", "counters", "sentences")})
    assert len(results) == 6
    assert all(result == results[0] for result in results)


def test_the_satellites_used_come_from_all_gsa_of_the_epoch() -> None:
    data = gga("100200.00") + EXAMPLES["F6"][1]
    data += sentence("GPGSV,1,1,02,02,45,120,38,03,30,210,41,1") + sentence("GLGSV,1,1,01,65,42,121,30,1")
    _, decoder = decoded(data)
    assert [(one.system, one.number, one.used) for one in decoder.sky] == [
        ("GLONASS", 65, True),
        ("GPS", 2, True),
        ("GPS", 3, False),
    ]


def test_a_gsa_of_many_slots_gives_its_dop() -> None:
    slots = ",".join(f"{n:02d}" for n in range(1, 21))
    epochs, _ = decoded(gga("100200.00") + sentence(f"GPGSA,A,3,{slots},2.5,1.3,2.1"))
    assert (epochs[0].pdop_milli, epochs[0].vdop_milli) == (2500, 2100)


def test_a_gsv_set_with_a_part_lost_is_left_out_and_counted() -> None:
    lost = sentence("GPGSV,3,1,09,02,45,120,38,1") + sentence("GPGSV,3,3,09,05,45,120,38,1")
    _, decoder = decoded(lost)
    assert decoder.sky == []
    assert decoder.counters["gsv_incomplete"] == 1


def test_a_gsv_cycle_may_run_over_talkers() -> None:
    run = sentence("GPGSV,2,1,02,02,45,120,38") + sentence("GLGSV,2,2,02,65,45,120,39")
    _, decoder = decoded(run)
    assert [(one.system, one.number) for one in decoder.sky] == [("GLONASS", 65), ("GPS", 2)]


def test_a_system_no_longer_sent_leaves_the_sky() -> None:
    both = sentence("GPGSV,1,1,01,02,45,120,38,1") + sentence("GAGSV,1,1,01,07,45,120,38,7")
    _, decoder = decoded(both + 5 * sentence("GPGSV,1,1,01,02,45,120,38,1"))
    assert [(one.system, one.number) for one in decoder.sky] == [("GPS", 2)]


@pytest.mark.parametrize(
    ("tail", "age_ms", "station"),
    [
        ("4,12,0.7,1.0,M,1.0,M,0.0,0000", None, None),
        ("1,12,0.7,1.0,M,1.0,M,0,", None, None),
        ("4,12,0.7,1.0,M,1.0,M,0.0,0061", 0, "0061"),
        ("4,12,0.7,1.0,M,1.0,M,,AB12", None, "AB12"),
    ],
)
def test_how_receivers_say_no_corrections(tail: str, age_ms: int | None, station: str | None) -> None:
    epochs, _ = decoded(sentence(f"GNGGA,100400.00,1234.5,S,02345.6,W,{tail}"))
    assert (epochs[0].age_ms, epochs[0].station) == (age_ms, station)


def test_sigmas_absent_zero_and_of_another_time() -> None:
    data = gga("100412.00") + sentence("GNGST,100412.00,0.85,,,,0.011,,0.025")
    data += gga("100413.00") + EXAMPLES["E9"][1].splitlines(keepends=True)[1]
    data += gga("100414.00") + sentence("GNGST,100409.00,0.85,,,,0.011,0.012,0.025")
    epochs, decoder = decoded(data)
    assert [one.sigma_latitude_e5m for one in epochs] == [1100, None, None]
    assert [one.sigma_longitude_e5m for one in epochs] == [None, None, None]
    assert [one.flags for one in epochs] == [0, 64, 0]
    assert decoder.counters["late"] == 1


def test_gns_with_more_decimals_gives_the_position_and_gga_the_quality() -> None:
    data = sentence("GNGGA,100215.00,1234.5679,S,02345.6789,W,4,12,0.7,123.4,M,-12.3,M,1.0,0061")
    data += sentence("GNGNS,100215.00,1234.5678901,S,02345.6789012,W,FF,12,0.7,123.456,-12.345,1.0,0061,V")
    epochs, decoder = decoded(data)
    assert len(epochs) == 1
    assert (epochs[0].source, epochs[0].quality, epochs[0].latitude_decimals) == ("GNS", 4, 7)
    assert (epochs[0].altitude_e5m, epochs[0].flags) == (12_345_600, 16)
    assert decoder.counters["position_from_gns"] == 1


def test_rmc_alone_waits_for_five_and_is_thrown_away_when_a_gga_comes() -> None:
    four = b"".join(rmc(f"10000{n}.00", "040531") for n in range(4))
    epochs, decoder = decoded(four + gga("100005.00"))
    assert [one.source for one in epochs] == ["GGA"]
    assert decoder.counters["rmc_only_discarded"] == 4
    epochs, _ = decoded(four + rmc("100004.00", "040531") + rmc("100005.00", "040531"))
    assert [one.source for one in epochs] == ["RMC"] * 6
    assert [one.number for one in epochs] == [1, 2, 3, 4, 5, 6]


def test_another_talkers_date_is_used_and_its_status_is_not() -> None:
    data = (
        gga("100400.00") + rmc("100400.00", "040531", talker="GP") + rmc("100400.00", "040531", talker="GP", status="V")
    )
    epochs, decoder = decoded(data, DecoderOptions(talker="GN"))
    assert [(one.talker, one.code) for one in epochs] == [("GN", None)]
    assert decoder.day0_source == "RMC"


def test_a_local_datum_holds_until_it_is_replaced() -> None:
    dtm = EXAMPLES["E12"][1].splitlines(keepends=True)[0]
    back = sentence("GNDTM,W84,,0.0,N,0.0,E,0.0,W84")
    epochs, _ = decoded(dtm + gga("100400.00") + gga("100401.00") + back + gga("100402.00"))
    assert [one.datum for one in epochs] == ["999", "999", None]


def test_a_type_is_known_by_its_whole_address() -> None:
    data = sentence("GNGGAX,1") + b"!" + gga("100400.00")[1:] + sentence("PQGSVX,1") + gga("100400.00")
    epochs, decoder = decoded(data)
    assert len(epochs) == 1
    assert decoder.sentences == {"GNGGAX": 1, "!GNGGA": 1, "PQGSV": 1, "GNGGA": 1}
    assert (decoder.counters["encapsulated"], decoder.counters["proprietary"]) == (1, 1)
