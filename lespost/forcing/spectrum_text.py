"""Wave spectra in text files: a table with one frequency per line, and buoy text with one time per line in two layouts.

`spectrum_files` chooses this module for anything that is not netCDF and turns what it returns into the simulation's axes.
"""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np

from lespost.errors import DataError
from lespost.forcing.spectrum_files import RawSpectra, density_unit, frequency_factor, refuse_unclear_angular
from lespost.units import conversion, convertible

#: value (frequency), as in the realtime layout.
PAIR = re.compile(r"([-+.\deE]+)\s*\(\s*([.\d]+)\s*\)")
NUMBER = r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
#: Energies and moments at or above this are the archives' mark of a missing value (999, 999.00).
MISSING = 998.5
#: Companion files in the archives' naming by what they hold: realtime suffixes.
COMPANIONS = {"mean_direction": ".swdir", "r1": ".swr1"}


def read_text(file: Path) -> RawSpectra:
    """The spectra in a text file. Raises DataError where it is none of the known layouts."""
    lines = _lines(file)
    header = next((line for line in lines if line.startswith("#")), "")
    if re.match(r"#\s*YY", header):
        return _buoy(file, lines)
    return _table(file, lines)


def _lines(file: Path) -> list[str]:
    try:
        text = file.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise DataError(f"{file}: neither netCDF nor text; give a netCDF file with standard names or a text table.") from None
    lines = [line.strip() for line in text.splitlines() if line.strip()]
    if not lines:
        raise DataError(f"{file}: the file is empty; fetch it again.")
    return lines


def _buoy(file: Path, lines: list[str]) -> RawSpectra:
    """Buoy text: energies by time, with directions and r1 from companion files beside it where there are both."""
    frequency, stamps, energy = _buoy_values(file, lines)
    parts: dict[str, np.ndarray] = {}
    for name, suffix in COMPANIONS.items():
        companion = file.with_suffix(suffix)
        if file.suffix == ".data_spec" and companion.is_file():
            other_frequency, other_stamps, values = _buoy_values(companion, _lines(companion))
            if other_frequency.size != frequency.size or not np.allclose(other_frequency, frequency, atol=5e-4):
                raise DataError(f"{companion}: its frequencies are not those of {file.name}; fetch both files for the "
                                "same buoy and day.")
            rows = {stamp: number for number, stamp in enumerate(other_stamps)}
            whole = np.full(energy.shape, np.nan)
            for number, stamp in enumerate(stamps):
                if stamp in rows:
                    whole[number] = values[rows[stamp]]
            parts[name] = whole
    if "r1" in parts and "mean_direction" not in parts:
        raise DataError(f"{file.with_suffix('.swr1')}: r1 without directions; put {file.with_suffix('.swdir').name} beside it.")
    if "r1" in parts and np.nanmax(parts["r1"]) > 1.5:
        parts["r1"] = parts["r1"] / 100
    return RawSpectra(frequency, energy, mean_direction=parts.get("mean_direction"), r1=parts.get("r1"), coming_from=True)


def _buoy_values(file: Path, lines: list[str]) -> tuple[np.ndarray, list[tuple[str, ...]], np.ndarray]:
    """(frequency [Hz] (nf,), time stamps (nt,), values (nt, nf)) of either buoy layout; missing values are NaN."""
    header = next((line for line in lines if line.startswith("#")), "")
    rows = [line for line in lines if not line.startswith("#")]
    if not rows:
        raise DataError(f"{file}: a header but no spectra; fetch the file again.")
    stamps: list[tuple[str, ...]] = []
    values: list[list[float]] = []
    if PAIR.search(rows[0]):
        axis: list[float] = []
        for number, row in enumerate(rows, start=1):
            pairs = PAIR.findall(row)
            found = [_number(frequency, file, number) for _, frequency in pairs]
            axis = axis or found
            if found != axis:
                raise DataError(f"{file}: spectrum {number} has {len(found)} frequencies unlike the first's {len(axis)}; "
                                "the line is cut off "
                                "or the buoy was changed: split the file there.")
            stamps.append(tuple(row.split()[:5]))
            values.append([_number(value, file, number) for value, _ in pairs])
    else:
        axis = [float(word) for word in header.lstrip("#").split() if re.fullmatch(NUMBER, word)]
        if len(axis) < 2:
            raise DataError(f"{file}: the header line names no frequencies and the values carry none in brackets; is it a "
                            "spectrum file?")
        lead = len(header.lstrip("#").split()) - len(axis)
        for number, row in enumerate(rows, start=1):
            words = row.split()
            if len(words) != lead + len(axis):
                raise DataError(f"{file}: spectrum {number} has {len(words) - lead} values for {len(axis)} frequencies; "
                                "the line is cut off.")
            stamps.append(tuple(words[:5]))
            values.append([_number(word, file, number) for word in words[lead:]])
    whole = np.array(values)
    return np.array(axis), stamps, np.where(whole >= MISSING, np.nan, whole)


def _number(word: str, file: Path, row: int) -> float:
    try:
        return float(word)
    except ValueError:
        raise DataError(f'{file}: spectrum {row} holds "{word}" where a number belongs; correct or delete the line.') from None


def _table(file: Path, lines: list[str]) -> RawSpectra:
    """One frequency per line: frequency, density, and where the header names them r1 and the direction (compass, from or to)."""
    body = [line.lstrip("#").strip() for line in lines]
    first = next((number for number, line in enumerate(body) if re.match(rf"{NUMBER}(?:[,;\s]|$)", line)), None)
    if first is None:
        raise DataError(f"{file}: no line of numbers; a spectrum table has a frequency and a density on each line, such "
                        "as 0.1,1.25.")
    header = body[first - 1] if first else ""
    columns = _split(header) if header else []
    rows = []
    for number, line in enumerate(body[first:], start=first + 1):
        words = [word for word in re.split(r"[,;\s]+", line) if word]
        try:
            rows.append([float(word) for word in words])
        except ValueError:
            raise DataError(f'{file}, line {number}: "{line[:40]}" is not a row of numbers; correct or delete it.') from None
        if len(rows[-1]) != len(rows[0]):
            raise DataError(f"{file}, line {number}: {len(rows[-1])} numbers where the first row has {len(rows[0])}; "
                            "complete the row.")
    table = np.array(rows)
    if table.shape[1] < 2:
        raise DataError(f"{file}: one column only; a spectrum table needs frequency and density.")
    if columns and len(columns) != table.shape[1]:
        raise DataError(f'{file}: the header "{header}" names {len(columns)} columns where the rows have '
                        f'{table.shape[1]}; separate them by commas.')
    if table.shape[1] > 2 and not columns:
        raise DataError(f"{file}: {table.shape[1]} columns without a header; name them, such as f (Hz),E "
                        "(m2/Hz),r1,direction_from (degree).")
    return _columns(file, table, columns)


def _split(header: str) -> list[str]:
    if re.search(r"[,;]", header):
        return [word.strip() for word in re.split(r"[,;]", header)]
    return re.findall(r"[^\s(\[]+(?:\s*[(\[][^)\]]*[)\]])?", header)


def _unit(column: str) -> str:
    match = re.search(r"[(\[]([^)\]]*)[)\]]", column)
    return match.group(1).strip() if match else ""


def _columns(file: Path, table: np.ndarray, columns: list[str]) -> RawSpectra:
    names = [re.sub(r"[(\[].*", "", column).strip().lower() for column in columns]
    if names and re.match(r"(t|period)$", names[0]):
        raise DataError(f'{file}: the first column "{columns[0]}" holds periods; convert the spectrum to variance per hertz over '
                        "frequency (E(f) = E(T) T², f = 1/T).")
    units = [_unit(column) for column in columns]
    place = {"frequency": 0, "density": 1}
    for number, name in enumerate(names):
        if re.match(r"(f|freq\w*|frequency)$", name):
            place["frequency"] = number
        elif name == "r1":
            place["r1"] = number
        elif "dir" in name or "alpha" in name or "theta" in name:
            place["direction"] = number
        elif re.match(r"(e|s|psd|density|spec\w*|energy\w*|variance\w*|efth)", name):
            place["density"] = number
    if place["density"] == place["frequency"]:
        raise DataError(f'{file}: the header "{", ".join(columns)}" does not tell frequency from density; write f (Hz),E '
                        '(m2/Hz).')
    frequency, density = table[:, place["frequency"]].copy(), table[:, place["density"]].copy()
    factor = 1.0
    if columns:
        unit = units[place["frequency"]]
        factor = frequency_factor(unit or "Hz", f"{file}, first column")
        refuse_unclear_angular(unit, units[place["density"]], False, str(file))
        unit = density_unit(units[place["density"]]) or "m2 s"
        if not convertible(unit.replace("rad-1", ""), "m2 s"):
            raise DataError(f'{file}: the density is in "{units[place["density"]]}", which is no m2/Hz; convert it to '
                            'variance per hertz.')
        density = density * conversion(unit.replace("rad-1", ""), "m2 s")[0] * (2 * np.pi if "rad" in unit else 1.0)
    if np.any(np.diff(frequency) == 0):
        raise DataError(f"{file}: a frequency stands twice; a table by frequency and direction belongs in a netCDF file.")
    coming_from, direction = True, None
    if "direction" in place:
        name = names[place["direction"]]
        going = bool(re.search(r"to|toward", name.replace("direction", "")))
        coming = "from" in name or "alpha" in name
        if going == coming:
            raise DataError(f'{file}: column "{columns[place["direction"]]}" does not say whether waves come from or go '
                            'to it; call it '
                            "direction_from or direction_to (compass degrees).")
        coming_from = coming
        scale = conversion(units[place["direction"]] or "degree", "degree", f"{file}, direction column")[0]
        direction = (table[:, place["direction"]] * scale)[None]
    r1 = table[:, place["r1"]][None] if "r1" in place else None
    density = np.where(density >= MISSING, np.nan, density) if np.any(np.isin(density, (999.0, 9999.0))) else density
    return RawSpectra(frequency * factor, density[None], mean_direction=direction, r1=r1, coming_from=coming_from)
