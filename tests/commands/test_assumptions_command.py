import argparse

import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.commands import assumptions as command
from morphotone.errors import AssumptionError


def run(*arguments):
    parser = argparse.ArgumentParser(prog="morphotone")
    command.add_arguments(parser)
    return command.run(parser.parse_args(list(arguments)))


@pytest.fixture
def write(tmp_path):
    def written(content):
        path = tmp_path / "night.toml"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return written


def test_prints_a_file_that_passes_its_own_check(capsys, write):
    assert run() == 0
    printed = capsys.readouterr()
    assert printed.err == ""
    path = write(printed.out)
    assert run("--check", str(path)) == 0
    checked = capsys.readouterr()
    assert checked.out == f"{path} can be used; it equals the defaults.\n"
    assert checked.err == ""


def test_check_lists_what_the_file_changes(capsys, write):
    path = write("[membrane]\nR_m_ohm_cm2 = 30000\n\n[frequencies]\nhz = [100]\n")
    assert run("--check", str(path)) == 0
    printed = capsys.readouterr()
    assert printed.out.splitlines() == [
        f"{path} can be used; it differs from the defaults:",
        "  membrane.R_m_ohm_cm2: 20000.0 against 30000.0",
        "  frequencies.hz: [] against [100.0]",
    ]
    assert printed.err == ""


def test_check_warns_on_standard_error_and_still_says_usable(capsys, write):
    assert run("--check", str(write("[membrane]\nC_m_uF_cm2 = 0.01\n"))) == 0
    printed = capsys.readouterr()
    assert "can be used" in printed.out
    assert printed.err.startswith(
        "warning: [membrane] C_m_uF_cm2 = 0.01 lies outside the published 0.5 to 2.4"
    )
    assert printed.err.count("\n") == 1


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        ("[membrane]\nR_m = 20000\n", "expected R_m_ohm_cm2, so give the value in ohm cm2"),
        ("[membrane]\nR_m_ohm_cm2 = \n", "not valid TOML: Invalid value (at line 2, column 15)"),
        (b"[membrane] # \xb5F\n", "no UTF-8 text (byte 0xb5 at offset 13)"),
    ],
)
def test_check_of_an_unusable_file_exits_2_and_names_it(capsys, write, content, sentence):
    path = write(content)
    assert run("--check", str(path)) == 2
    printed = capsys.readouterr()
    assert printed.out == ""
    assert printed.err.startswith(str(path))
    assert sentence in printed.err
    assert printed.err.count("\n") == 1


def test_a_missing_file_is_refused_with_the_way_to_make_one(tmp_path):
    with pytest.raises(AssumptionError, match=r"absent.toml cannot be read .*: .* writes\.$"):
        command.load_assumptions(tmp_path / "absent.toml")


def test_a_folder_is_refused(tmp_path):
    with pytest.raises(AssumptionError, match="cannot be read"):
        command.load_assumptions(tmp_path)


def test_a_byte_order_mark_does_no_harm(write):
    assert command.load_assumptions(write(b"\xef\xbb\xbf[soma]\nshunt_nS = 2\n")) == Assumptions(
        soma_shunt_nS=2
    )


def test_help_names_units_and_an_example(capsys):
    with pytest.raises(SystemExit, match="0"):
        run("--help")
    printed = capsys.readouterr().out
    assert "ohm cm2" in printed
    assert "morphotone assumptions --check night.toml" in printed
