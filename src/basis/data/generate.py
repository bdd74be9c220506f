#!/usr/bin/env python3
"""Writes the bundled basis sets from the PyPI package basis_set_exchange.

Usage: pip install basis_set_exchange==0.12, then run this script; it rewrites the .txt files
beside itself. The numbers are the published ones: exponents and contraction coefficients as given,
hydrogen to krypton as far as the set goes.

File format. Lines that start with '#' carry the name, the role and the literature. A line with an
element symbol opens an element. Every other line is one shell: the letter of its angular momentum,
the exponents, and for each contraction ':' and its coefficients over normalised primitives. A
shell without ':' is a single primitive.
"""

import pathlib

import basis_set_exchange as bse

HERE = pathlib.Path(__file__).resolve().parent
LAST_ELEMENT = 36
LETTERS = "spdfghi"

# Name in the exchange -> name of the file.
SETS = {
    "STO-3G": "sto-3g",
    "6-31G*": "6-31gs",
    "cc-pVDZ": "cc-pvdz",
    "cc-pVTZ": "cc-pvtz",
    "aug-cc-pVDZ": "aug-cc-pvdz",
    "aug-cc-pVTZ": "aug-cc-pvtz",
    "def2-SVP": "def2-svp",
    "def2-SVPD": "def2-svpd",
    "def2-TZVP": "def2-tzvp",
    "def2-TZVPP": "def2-tzvpp",
    "def2-TZVPD": "def2-tzvpd",
    "def2-QZVP": "def2-qzvp",
    "def2-universal-JKFIT": "def2-universal-jkfit",
    "cc-pVDZ-RIFIT": "cc-pvdz-rifit",
    "cc-pVTZ-RIFIT": "cc-pvtz-rifit",
    "aug-cc-pVDZ-RIFIT": "aug-cc-pvdz-rifit",
    "aug-cc-pVTZ-RIFIT": "aug-cc-pvtz-rifit",
    "def2-SVP-RIFIT": "def2-svp-rifit",
    "def2-SVPD-RIFIT": "def2-svpd-rifit",
    "def2-TZVP-RIFIT": "def2-tzvp-rifit",
    "def2-TZVPP-RIFIT": "def2-tzvpp-rifit",
    "def2-TZVPD-RIFIT": "def2-tzvpd-rifit",
    "def2-QZVP-RIFIT": "def2-qzvp-rifit",
}


def number(text):
    """The shortest text that reads back as the same double."""
    value = repr(float(text))
    return value[:-2] if value.endswith(".0") else value


def shell_lines(shell):
    momenta = shell["angular_momentum"]
    exponents = [number(e) for e in shell["exponents"]]
    columns = shell["coefficients"]
    # An SP shell has one column per momentum; a general contraction has one momentum.
    if len(momenta) > 1:
        groups = [(l, [column]) for l, column in zip(momenta, columns)]
    else:
        groups = [(momenta[0], columns)]
    for l, group in groups:
        line = [LETTERS[l], *exponents]
        if len(exponents) > 1 or len(group) > 1:
            for column in group:
                line += [":", *(number(c) for c in column)]
        yield " ".join(line)


def ranges(numbers):
    """'H-He B N-F' for a list of atomic numbers."""
    symbols = [bse.lut.element_sym_from_Z(z, True) for z in range(LAST_ELEMENT + 1) if z]
    runs = []
    for z in sorted(numbers):
        if runs and runs[-1][1] == z - 1:
            runs[-1][1] = z
        else:
            runs.append([z, z])
    return " ".join(
        symbols[a - 1] if a == b else f"{symbols[a - 1]}-{symbols[b - 1]}" for a, b in runs
    )


def citation(data):
    names = [name.split(",")[0] for name in data.get("authors", data.get("editors", []))]
    authors = ", ".join(names) if len(names) <= 6 else f"{names[0]} et al."
    if "journal" not in data:
        return f"{authors}: unpublished, distributed with their program"
    where = " ".join(data[key] for key in ("journal", "volume", "pages") if key in data)
    text = f"{authors}: {where} ({data.get('year', 'no year')})"
    if "doi" in data:
        text += f", doi {data['doi']}"
    return " ".join(text.split())


def references(name, elements):
    """Each citation once, with the elements that it covers."""
    covered = {}
    for group in bse.get_references(name, elements=elements):
        for info in group["reference_info"]:
            for _, data in info["reference_data"]:
                covered.setdefault(citation(data), set()).update(int(z) for z in group["elements"])
    return covered


def main():
    for name, file_name in SETS.items():
        full = bse.get_basis(name)
        elements = sorted(z for z in map(int, full["elements"]) if z <= LAST_ELEMENT)
        lines = [
            f"# name {name}",
            f"# role {'orbital' if full['role'] == 'orbital' else 'auxiliary'}",
            f"# origin Basis Set Exchange {bse.version()}, version {full['version']} of the set",
        ]
        for text, covered in references(name, elements).items():
            lines.append(f"# reference {ranges(covered)}: {text}")
        for z in elements:
            lines.append(bse.lut.element_sym_from_Z(z, True))
            for shell in full["elements"][str(z)]["electron_shells"]:
                lines += shell_lines(shell)
        path = HERE / f"{file_name}.txt"
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")
        print(f"{path.name}: {len(elements)} elements, {path.stat().st_size} bytes")


if __name__ == "__main__":
    main()
