"""Plug-in files: one that works, and what each kind of broken one says."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest
from small_field import append, edit, files_of

import subside as sd
from subside.cli.main import main
from subside.errors import InputError, PluginError
from subside.hooks.registry import registry

LAW = '''\
"""A law that forgets: half of the strain comes at once, none later."""

from subside.api import Law, Parameter, hookimpl


class Halved(Law):
    name = "halved"
    summary = "half of a linear law"
    source = "invented for this test"
    parameters = (Parameter("compressibility", "1/Pa", "strain per stress", minimum=0.0,
                            example="1e-5 1/bar"),)
    linear_in = ("compressibility",)

    def strain(self, history, rock):
        return 0.5 * rock.compressibility * history.stress_rise


@hookimpl
def subside_compaction_laws():
    return [Halved]
'''
LINEAR = 'law = "linear"\nuniaxial_compressibility = "1e-5 1/bar"'
HALVED = 'law = "halved"\ncompressibility = "1e-5 1/bar"'


def law_file(folder: Path, *changes: tuple[str, str], name: str = "law.py") -> Path:
    """The law above with some of its words changed."""
    text = LAW
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    path = folder / name
    path.write_text(text)
    return path


def run_command(*arguments: object) -> int:
    with pytest.raises(SystemExit) as ended:
        main([str(a) for a in arguments])
    return int(ended.value.code or 0)


# -- one that works ----------------------------------------------------------------------------


def test_a_law_from_a_file_runs(field, capsys):
    plain = sd.run(field / "scenario.toml")
    edit(field, LINEAR, HALVED)
    file = law_file(field)
    assert run_command("run", field / "scenario.toml", "--plugin", file, "--no-figures") == 0
    assert capsys.readouterr().err == ""
    result = sd.read_result(field / "scenario.nc")
    np.testing.assert_allclose(result["point_subsidence"], 0.5 * plain["point_subsidence"],
                               rtol=1e-12)
    assert f"law halved of {file} sha256:" in result.attrs["plugins"]


def test_a_law_named_by_the_scenario_and_by_python(field):
    law_file(field)
    edit(field, LINEAR, HALVED)
    with pytest.raises(InputError, match=r"no law is called 'halved'.*Known: bilinear, isotach"):
        sd.run(field / "scenario.toml")
    by_python = sd.run(field / "scenario.toml", plugins=[field / "law.py"])
    edit(field, 'title = "small field"', 'plugins = ["law.py"]')
    by_scenario = sd.run(field / "scenario.toml")
    np.testing.assert_array_equal(by_scenario["point_subsidence"], by_python["point_subsidence"])


def test_describe_a_law_from_a_file(field, capsys):
    assert run_command("plugins", "describe", "halved", "--plugin", law_file(field)) == 0
    text = capsys.readouterr().out
    for word in ("halved (law", "half of a linear law", "linear in: compressibility",
                 "compressibility  [1/Pa]  required; at least 0 1/Pa", "yield_biot"):
        assert word in text


def test_the_same_file_twice_is_loaded_once(field):
    file = law_file(field)
    registry.load_file(file)
    registry.load_file(file)
    assert "halved" in registry.all("law")


def test_hooks_are_called_once(field):
    file = law_file(field, ("    return [Halved]", "    CALLS.append(1)\n    return [Halved]"),
                    ("class Halved", "CALLS = []\n\n\nclass Halved"))
    registry.load_file(file)
    calls = sys.modules[registry.all("law")["halved"].cls.__module__].CALLS
    for _ in range(3):
        registry.get("law", "halved", "here")
        registry.find("halved")
    assert len(calls) == 1


def test_a_law_gets_the_fields_it_needs_in_si(field):
    """temperature is 90 degC in the grid, 363.15 K for the law."""
    file = law_file(
        field, ("linear_in =", 'needs = ("temperature",)\n    linear_in ='),
        ("return 0.5 *", 'return history.fields["temperature"] / 363.15 * 0.5 *'))
    edit(field, LINEAR, HALVED)
    warm = sd.run(field / "scenario.toml", plugins=[file])
    edit(field, HALVED, LINEAR)
    plain = sd.run(field / "scenario.toml")
    np.testing.assert_allclose(warm["point_subsidence"], 0.5 * plain["point_subsidence"],
                               rtol=1e-12)


# -- broken ones -------------------------------------------------------------------------------

BROKEN: dict[str, tuple[list[tuple[str, str]], list[str]]] = {
    "clash of names": ([('"halved"', '"linear"')],
                       ["two plug-ins are called 'linear' (law)", "subside and", "law.py",
                        "rename one"]),
    "misspelt hook": ([("def subside_compaction_laws", "def subside_compaction_law")],
                      ["'subside_compaction_law' is not a hook",
                       "Did you mean 'subside_compaction_laws'?"]),
    "no mark": ([("@hookimpl\n", "")], ["subside_compaction_laws is not marked with @hookimpl",
                                        "from subside.api import hookimpl"]),
    "no hook": ([("def subside_compaction_laws", "def laws")], ["it implements no hook"]),
    "import error": ([("from subside.api", "import not_there_at_all\nfrom subside.api")],
                     ["cannot be loaded: ModuleNotFoundError", "'not_there_at_all'"]),
    "name missing from the api": ([("import Law,", "import Laws,")],
                                  ["cannot be loaded: ImportError", "'Laws'"]),
    "syntax": ([("class Halved(Law):", "class Halved(Law)")], ["cannot be loaded: SyntaxError"]),
    "ends the process": ([("class Halved", "raise SystemExit(0)\n\n\nclass Halved")],
                         ["cannot be loaded: SystemExit"]),
    "not a list": ([("return [Halved]", "return Halved")],
                   ["subside_compaction_laws must return a list of classes", "ABCMeta"]),
    "an instance": ([("return [Halved]", "return [Halved()]")],
                    ["is not a class derived from subside.api.Law"]),
    "wrong base class": ([("(Law)", "(Quantity)"), ("import Law,", "import Law, Quantity,")],
                         ["Halved", "is not a class derived from subside.api.Law"]),
    "abstract": ([("def strain", "def strains")], ["Halved lacks strain"]),
    "no name": ([('name = "halved"', 'name = ""')], ["Halved lacks name"]),
    "hook raises": ([("return [Halved]", "return [Halved][1]")],
                    ["subside_compaction_laws failed with IndexError"]),
    "no unit of a parameter": ([('"1/Pa"', '"1/Pascals"')], ["unknown unit '1/Pascals'"]),
    "parameters of another kind": ([("parameters = (Parameter(", "parameters = (dict(name=")],
                                   ["cannot be loaded"]),
    "parameters in words": ([('(Parameter("compressibility", "1/Pa", "strain per stress", '
                              'minimum=0.0,\n                            example="1e-5 1/bar"),)',
                              '("compressibility",)')],
                            ["Halved.parameters holds 'compressibility'",
                             "no subside.api.Parameter"]),
}


@pytest.mark.parametrize("label", BROKEN)
def test_a_broken_plug_in_says_what_is_wrong(label, field, capsys):
    changes, words = BROKEN[label]
    edit(field, LINEAR, HALVED)
    file = law_file(field, *changes)
    before = files_of(field) - {"__pycache__"}
    assert run_command("run", field / "scenario.toml", "--plugin", file) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.startswith("subside: ") and err.count("\n") == 1
    assert str(file) in err
    for word in words:
        assert word in err
    assert {f for f in files_of(field) if "__pycache__" not in f} == before


@pytest.mark.parametrize("label", BROKEN)
def test_a_refused_plug_in_leaves_the_process_usable(label, field):
    """In Python one goes on after the error: the next run must not meet the broken file again."""
    before = set(sys.modules)
    with pytest.raises(PluginError):
        sd.run(field / "scenario.toml", plugins=[law_file(field, *BROKEN[label][0])])
    assert not [m for m in set(sys.modules) - before if m.startswith("subside_plugin_")]
    assert sd.run(field / "scenario.toml")["point_subsidence"].size == 6
    registry.load_file(law_file(field, name="mended.py"))
    assert "halved" in registry.all("law")


def test_a_file_that_is_not_there_or_not_python(field, capsys):
    assert run_command("plugins", "list", "--plugin", field / "absent.py") == 2
    assert "absent.py' does not exist" in capsys.readouterr().err
    assert run_command("plugins", "list", "--plugin", field / "grid.nc") == 2
    assert "grid.nc' is not a Python file" in capsys.readouterr().err


# -- laws that misbehave while they run --------------------------------------------------------

MISBEHAVING: dict[str, tuple[list[tuple[str, str]], list[str]]] = {
    "shape": ([("history.stress_rise\n", "history.stress_rise[0]\n")],
              ["[compaction]: law 'halved' returned strain of shape (6,)",
               "(time, cell) = (3, 6)"]),
    "not finite": ([("return 0.5 *", "return float('nan') *")],
                   ["law 'halved' gives no finite strain in (cell=0)"]),
    "error of its own": ([("return 0.5 *", "return {}['a'] *")],
                         ["[compaction]: law 'halved' failed with KeyError: 'a'",
                          "fault of the law", "--debug"]),
    "writes into its input": ([("        return 0.5 *", "        history.stress_rise[0] = 1.0\n"
                                "        return 0.5 *")],
                              ["law 'halved' failed with ValueError", "read-only"]),
    "complains of a cell": (
        [("        return 0.5", "        raise InputError('it is too soft', cell=3)\n"
          "        return 0.5"),
         ("import Law,", "import InputError, Law,")],
        ["[compaction], (cell=3): it is too soft"]),
    "complains of a cell before": (
        [("    def strain(", "    def check(self, rock):\n"
          "        raise InputError('it is too hard', cell=5)\n\n    def strain("),
         ("import Law,", "import InputError, Law,")],
        ["[compaction], (cell=5): it is too hard"]),
    "needs what is not there": ([("linear_in =", 'needs = ("tempratur",)\n    linear_in =')],
                                ["[compaction]: law 'halved': the grid has no field 'tempratur'",
                                 "Did you mean 'temperature'?"]),
    "needs a field without a unit": ([("linear_in =", 'needs = ("odd",)\n    linear_in =')],
                                     ["law 'halved': the grid's field 'odd' cannot be used, it has "
                                      "units 'barz'", "give it units"]),
}


@pytest.mark.parametrize("label", MISBEHAVING)
def test_a_law_that_misbehaves(label, field, capsys):
    changes, words = MISBEHAVING[label]
    edit(field, LINEAR, HALVED)
    file = law_file(field, *changes)
    append(field, '[output]\nfile = "bowl.nc"\n')
    assert run_command("run", field / "scenario.toml", "--plugin", file) == 2
    err = capsys.readouterr().err
    assert err.startswith("subside: scenario '") and err.count("\n") == 1
    for word in words:
        assert word in err
    assert not (field / "bowl.nc").exists()


# -- plug-ins that are installed ---------------------------------------------------------------


class _Entry:
    """An entry point of a package that cannot be imported."""

    name = "stranger"
    value = "stranger.laws"

    class dist:
        name = "stranger-laws"
        version = "0.3"

    def load(self):
        raise ImportError("no module named 'stranger'")


def test_a_strangers_broken_package_is_left_out_with_a_warning(field, monkeypatch, capsys):
    from subside.hooks import registry as module

    real = module.entry_points
    monkeypatch.setattr(module, "entry_points", lambda group: [*real(group=group), _Entry()])
    assert run_command("check", field / "scenario.toml") == 0
    err = capsys.readouterr().err
    assert err == ("subside: warning: plug-in 'stranger' of stranger-laws 0.3 is left out: "
                   "ImportError: no module named 'stranger'\n")
    # and whoever asks for what it would have brought learns why it is not there
    edit(field, '"linear"', '"strange"')
    assert run_command("check", field / "scenario.toml") == 2
    assert "Left out: stranger-laws 0.3 (stranger.laws): ImportError" in capsys.readouterr().err


def test_a_field_comes_in_the_unit_the_parameter_declares(field):
    """A law that counts in 1/bar: the grid's `cm` is held in 1/Pa and must be turned back."""
    by_bar = law_file(field, ('"1/Pa"', '"1/bar"'), ("0.5 * rock", "1e-5 * rock"))
    edit(field, LINEAR, 'law = "halved"\ncompressibility = { field = "cm" }')
    counted_in_bar = sd.run(field / "scenario.toml", plugins=[by_bar])
    edit(field, "law = \"halved\"\ncompressibility", 'law = "linear"\nuniaxial_compressibility')
    plain = sd.run(field / "scenario.toml")
    np.testing.assert_allclose(counted_in_bar["point_subsidence"], plain["point_subsidence"],
                               rtol=1e-12)
