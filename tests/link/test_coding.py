import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from link_examples import make_transmitter

from planner.errors import InputError
from planner.link.coding import (
    DVB_S2,
    MODCODS,
    ebn0_db_of,
    esn0_db_of,
    find_modcod,
    information_rate_mbps,
    modcods_of,
    shannon_esn0_db,
)
from planner.mission.transmitter import OwnModcod

TABLE_ROUNDING_DB = 0.01  # ETSI's table has two decimals
TABLE_ROUNDING = 1e-6  # and six in its efficiencies


def test_no_row_beats_shannon():
    for row in MODCODS.values():
        assert row.required_esn0_db > shannon_esn0_db(row.bits_per_symbol), row.name
        eta = row.code_rate_bits
        assert row.required_ebn0_db > 10 * np.log10((2**eta - 1) / eta), row.name


def test_dvb_s2_quotes_its_table():
    # ETSI EN 302 307-1 Table 13 (second-hand)
    assert (MODCODS["QPSK 1/4"].bits_per_symbol, MODCODS["QPSK 1/4"].required_esn0_db) == (0.490243, -2.35)
    assert (MODCODS["32APSK 9/10"].bits_per_symbol, MODCODS["32APSK 9/10"].required_esn0_db) == (4.453027, 16.05)
    assert len(DVB_S2) == 28


def test_dvb_s2_efficiencies_contain_the_frame_header():
    # EN 302 307-1: QPSK 1/4 normal frame, 16 200 - 192 BCH bits and 80 of baseband header in 32 400 symbols and a 90
    assert MODCODS["QPSK 1/4"].bits_per_symbol == pytest.approx((16_008 - 80) / (32_400 + 90), abs=TABLE_ROUNDING)


def test_pilots_cost_36_symbols_in_1476():
    plain, piloted = (find_modcod("8PSK 3/4", make_transmitter(pilots=pilots)) for pilots in (False, True))
    assert piloted.bits_per_symbol == pytest.approx(plain.bits_per_symbol * 1440 / 1476)
    assert find_modcod("turbo 1/2", make_transmitter(pilots=True)) == MODCODS["turbo 1/2"]


@pytest.mark.parametrize(
    ("name", "ebn0_db", "bits"),
    [
        # Eb/N0 as in CCSDS 130.1-G-3 (second-hand), exact Q, union bound (computed) or memory; frames by CCSDS 131.0-B
        ("uncoded", 10.53, 2 * 8920 / 8952),
        ("convolutional 1/2", 4.17, 8920 / 8952),
        ("convolutional 1/2 + RS(255,223)", 2.3, 8920 / 10232),
        ("turbo 1/2", 1.0, 2 * 8920 / 17912),
        ("LDPC (8160,7136)", 3.9, 2 * 7136 / 8192),
    ],
)
def test_ccsds_rows_in_both_modulations(name, ebn0_db, bits):
    quaternary, binary = MODCODS[name], MODCODS["BPSK " + name]
    assert quaternary.bits_per_symbol == pytest.approx(bits)
    assert binary.bits_per_symbol == pytest.approx(bits / 2)
    assert quaternary.required_ebn0_db == pytest.approx(ebn0_db)
    assert binary.required_ebn0_db == pytest.approx(ebn0_db)
    assert quaternary.required_esn0_db - binary.required_esn0_db == pytest.approx(3.01, abs=TABLE_ROUNDING_DB)


def test_uncoded_needs_what_the_q_function_says():
    from scipy.stats import norm

    ebn0 = 10 ** (MODCODS["uncoded"].required_ebn0_db / 10)
    assert norm.sf(np.sqrt(2 * ebn0)) == pytest.approx(1e-6, rel=0.01)


@given(st.floats(0.01, 8))
def test_shannons_limit_tends_to_ln_2(eta):
    ebn0 = 10 ** (shannon_esn0_db(eta) / 10) / eta
    assert ebn0 >= np.log(2)
    assert 10 * np.log10(np.log(2)) == pytest.approx(-1.59, abs=TABLE_ROUNDING_DB)


def test_rows_that_cost_more_for_less_are_left_out():
    # QPSK 8/9: 1.766 bits at 6.20 dB; 8PSK 3/5: 1.780 bits at 5.50 dB
    chosen = modcods_of(make_transmitter(modcods=("8PSK 3/5", "QPSK 8/9", "QPSK 1/2"), modcod_choice="variable"))
    assert [row.name for row in chosen] == ["QPSK 1/2", "8PSK 3/5"]


def test_rows_come_in_rising_rate_and_rising_need():
    rows = modcods_of(make_transmitter(modcods=tuple(MODCODS), modcod_choice="variable"))
    assert all(a.bits_per_symbol < b.bits_per_symbol for a, b in itertools.pairwise(rows))
    assert all(a.required_esn0_db < b.required_esn0_db for a, b in itertools.pairwise(rows))


def test_a_row_of_ones_own_takes_its_place():
    own = OwnModcod(name="house code", bits_per_symbol=1.2, required_esn0_db=2.5)
    mode = make_transmitter(modcods=("house code",), own_modcods=(own,))
    assert modcods_of(mode)[0].required_esn0_db == 2.5


def test_a_row_of_ones_own_that_beats_shannon_is_refused():
    own = OwnModcod(name="too good", bits_per_symbol=2.0, required_esn0_db=4.5)
    with pytest.raises(InputError, match=r"'too good' of mode 'K': .* Shannon's limit, 4\.77 dB at 2 bits .* got 4\.5"):
        modcods_of(make_transmitter(modcods=("too good",), own_modcods=(own,)))


def test_an_unknown_name_is_told_with_the_nearest_known():
    with pytest.raises(InputError, match=r"modcod '8PSK 3/44' is not known to mode 'K'; did you mean \"8PSK 3/4\"\?"):
        modcods_of(make_transmitter(modcods=("8PSK 3/44",)))


def test_rate_after_framing_overheads_and_reserve():
    mode = make_transmitter(upper_layer_overhead_pct=10.0, retransmission_reserve_pct=5.0)
    assert information_rate_mbps(mode, 1.5) == pytest.approx(20 * 1.5 * 0.9 * 0.95)


def test_energy_per_symbol_and_per_bit():
    assert esn0_db_of(80.0, 1.0) == pytest.approx(20.0)
    assert ebn0_db_of(20.0, MODCODS["BPSK convolutional 1/2"]) == pytest.approx(23.01, abs=TABLE_ROUNDING_DB)
