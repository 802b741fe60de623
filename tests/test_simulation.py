"""The deck runner against closed forms of linear circuits."""

from __future__ import annotations

import math
import os
import sys
import threading

import numpy as np
import pytest

from gmid.errors import (
    DataFault,
    FileTrouble,
    MissingExtra,
    NoSolution,
    UnknownName,
    UsageFault,
)
from gmid.simulation import (
    AcResult,
    DcResult,
    NoiseResult,
    OperatingResult,
    TransientResult,
    inline_includes,
    run_deck,
)

BOLTZMANN = 1.380649e-23  # SI definition, 2019
RC = "rc\nv1 in 0 dc 1 ac 1 pulse(0 1 0 1p 1p 1 2)\nr1 in out 1k\nc1 out 0 1n\n"
MODEL = ".model nx nmos level=14 vth0=0.4 toxe=4n\n"


class TestAnalyses:
    def test_operating_point_of_a_divider(self) -> None:
        result = run_deck("divider\nv1 in 0 2\nr1 in out 1k\nr2 out 0 3k\n.op\n.end\n")
        assert isinstance(result, OperatingResult)
        assert result.voltage("OUT")[0] == pytest.approx(1.5, rel=1e-9)
        assert result.voltage("in", "out")[0] == pytest.approx(0.5, rel=1e-9)
        assert result.current("V1")[0] == pytest.approx(-0.5e-3, rel=1e-9)

    def test_ac_of_a_first_order_lowpass(self) -> None:
        result = run_deck(RC + ".ac dec 10 1k 10meg\n.end\n")
        assert isinstance(result, AcResult)
        expected = 1 / (1 + 2j * math.pi * result.frequency * 1e3 * 1e-9)
        np.testing.assert_allclose(result.voltage("out"), expected, rtol=1e-9)

    def test_dc_sweep(self) -> None:
        result = run_deck("divider\nv1 in 0 2\nr1 in out 1k\nr2 out 0 3k\n.dc v1 0 1 0.25\n.end\n")
        assert isinstance(result, DcResult)
        np.testing.assert_allclose(result.swept, [0, 0.25, 0.5, 0.75, 1])
        np.testing.assert_allclose(result.voltage("out"), 0.75 * result.swept, atol=1e-12)

    def test_noise_of_a_resistor_is_4ktr(self) -> None:
        head = "noise\n.options temp=85\nv1 in 0 0 ac 1\nr1 in out 10k\n"
        result = run_deck(head + ".noise v(out) v1 dec 1 1 100\n.end\n")
        assert isinstance(result, NoiseResult)
        expected = 4 * BOLTZMANN * (85 + 273.15) * 10e3
        np.testing.assert_allclose(result.output, expected, rtol=1e-5)
        np.testing.assert_allclose(result.by_device["r1"], expected, rtol=1e-5)

    def test_step_of_a_first_order_lowpass(self) -> None:
        result = run_deck(RC + ".tran 2n 5u\n.end\n")
        assert isinstance(result, TransientResult)
        later = result.time > 0
        expected = 1 - np.exp(-result.time[later] / 1e-6)
        np.testing.assert_allclose(result.voltage("out")[later], expected, atol=3e-3)

    def test_counted_devices_carry_a_multiple(self) -> None:
        bias = "vd d 0 1\nvg g 0 0.8\n"
        one = run_deck(f"one\n{MODEL}{bias}m1 d g 0 0 nx w=2u l=0.5u m=1\n.op\n.end\n")
        six = run_deck(f"six\n{MODEL}{bias}m1 d g 0 0 nx w=2u l=0.5u m=6\n.op\n.end\n")
        ratio = six.current("vd")[0] / one.current("vd")[0]
        assert ratio == pytest.approx(6, rel=1e-6)


class TestManners:
    def test_nothing_is_printed_or_left_behind(self, tmp_path, monkeypatch, capfd) -> None:
        monkeypatch.chdir(tmp_path)
        deck = f"stray\n{MODEL[:-1]} nonsense=1\nvd d 0 1\nm1 d d 0 0 nx w=2u l=0.5u\n.op\n.end\n"
        result = run_deck(deck)
        assert "nonsense" in result.log
        assert os.listdir(tmp_path) == []
        assert os.getcwd() == str(tmp_path)
        assert capfd.readouterr() == ("", "")

    def test_threads_take_turns(self) -> None:
        found: list[float] = []

        def work(ohms: int) -> None:
            deck = f"t\nv1 a 0 1\nr1 a b {ohms}\nr2 b 0 100\n.op\n.end\n"
            found.append(float(run_deck(deck).voltage("b")[0]) * (ohms + 100))

        threads = [threading.Thread(target=work, args=(100 * k,)) for k in range(1, 9)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
        np.testing.assert_allclose(found, np.full(8, 100.0), rtol=1e-9)


class TestRefusals:
    @pytest.mark.parametrize("lines", ["", ".op\n.ac dec 1 1 10\n"])
    def test_one_analysis_a_deck(self, lines: str) -> None:
        with pytest.raises(UsageFault, match="exactly one analysis"):
            run_deck(f"none\nv1 a 0 1\nr1 a 0 1\n{lines}.end\n")

    def test_what_would_be_left_out(self) -> None:
        with pytest.raises(DataFault, match="r1"):
            run_deck("bad\nv1 a 0 1\nr1 a 0 plenty\n.op\n.end\n")

    def test_unknown_model(self) -> None:
        with pytest.raises(DataFault, match="nomodel"):
            run_deck("bad\nv1 a 0 1\nm1 a a 0 0 nomodel w=1u l=1u\n.op\n.end\n")

    def test_no_solution(self) -> None:
        with pytest.raises(NoSolution):
            run_deck("loop\nv1 a 0 1\nv2 a 0 2\nr1 a 0 1\n.op\n.end\n")

    def test_signals_that_are_not_there(self) -> None:
        result = run_deck("r\nv1 node 0 1\nr1 node 0 1\n.op\n.end\n")
        with pytest.raises(UnknownName, match=r"Did you mean v\(node\)"):
            result.voltage("mode")


class TestIncludes:
    def test_from_disk_and_memory(self, tmp_path) -> None:
        (tmp_path / "sub").mkdir()
        (tmp_path / "sub" / "a.inc").write_text(".param a=1\n.inc 'b.inc'")
        (tmp_path / "sub" / "b.inc").write_text(".param b=2")
        text = '* t\n.include "sub/a.inc"\n.INCLUDE c.inc\n.end'
        flat = inline_includes(text, folder=tmp_path, files={"c.inc": ".param c=3"})
        assert flat.splitlines() == ["* t", ".param a=1", ".param b=2", ".param c=3", ".end"]

    def test_library_gets_an_absolute_path(self, tmp_path) -> None:
        (tmp_path / "x.lib").write_text(".lib tt\n.endl\n")
        flat = inline_includes("* t\n.lib x.lib tt", folder=tmp_path)
        assert flat.splitlines()[1] == f'.lib "{tmp_path / "x.lib"}" tt'

    def test_missing_file(self, tmp_path) -> None:
        with pytest.raises(FileTrouble, match=r"deck:2: cannot read"):
            inline_includes("* t\n.include gone.inc", folder=tmp_path)

    def test_a_file_that_includes_itself(self) -> None:
        with pytest.raises(DataFault, match="includes itself"):
            inline_includes("* t\n.include a", files={"a": ".include a"})


def test_missing_extra_says_what_to_install(monkeypatch) -> None:
    monkeypatch.setitem(sys.modules, "neospice", None)
    with pytest.raises(MissingExtra, match=r'pip install "gmid\[simulate\]"'):
        run_deck("r\nv1 a 0 1\nr1 a 0 1\n.op\n.end\n")
