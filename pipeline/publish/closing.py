"""The end of the report: cautions, inputs, and where everything comes from."""

from __future__ import annotations

from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Results

CAUTIONS = (
    (
        "What the value covers. ",
        (
            "It is the use value of today's visitors, in one year, at the stated prices. It leaves "
            "out people who value the place without coming, and those who would come if it changed."
        ),
    ),
    (
        "What it is for. ",
        (
            "It informs a decision; it is not a licence to set a fee on its own. The fee figures "
            "hold all else as it is and say nothing of who can afford the fee. Have a figure that "
            "decides money reviewed by a qualified economist."
        ),
    ),
    (
        "Access and safety. ",
        (
            "Whether people may enter, drive, wade or walk somewhere is for the owner, the law and "
            "local rules. A route in this report is a calculation on map data, no advice to drive "
            "it: closures, fords, water levels, cliffs and winter are not in it."
        ),
    ),
    (
        "Privacy. ",
        (
            "Postal codes of visitors are personal data. This report and its tables hold zones, "
            "never records of people; keep the records under the data protection law that applies."
        ),
    ),
)


def cautions() -> Html:
    """The usual cautions."""
    return tag("ul", *(tag("li", tag("b", head), body) for head, body in CAUTIONS), class_="care")


def inputs_table(results: Results) -> Html:
    """Input files with their digests."""
    rows = [
        (file.name, file.role, f"{file.bytes:,}", tag("code", file.sha256, class_="sha"))
        for file in results.provenance.inputs
    ]
    if not rows:
        return tag("p", "The study names no input file.")
    head = ("File", "Named by", "Bytes", "SHA-256")
    return table(head, rows, caption="Input files", numbers=(2,), class_="prose")


def made_with(results: Results) -> Html:
    """Versions, seed and digests, so that the run can be repeated."""
    made = results.provenance
    versions = ", ".join(f"{name} {version}" for name, version in sorted(made.versions.items()))
    return join(
        [
            tag("p", f"Made with {versions}. Seed of every random draw: {made.seed}."),
            tag("p", "Settings ", tag("code", made.study_sha256, class_="sha"), class_="fine"),
            tag("p", "Code ", tag("code", made.code_sha256, class_="sha"), class_="fine"),
            tag(
                "p",
                "The same inputs, settings and code give this file again, byte for byte. All "
                "settings are in run.json; all figures are in tables/, with their meaning in "
                "tables/data_dictionary.csv.",
            ),
        ]
    )


def attribution(results: Results) -> Html:
    """Whose data and whose colours."""
    data = results.study.publish.attribution
    return tag(
        "p",
        tag("b", data),
        ". Colours of the map: scheme YlGnBu with five classes from ColorBrewer by Cynthia "
        "A. Brewer, which keeps its order with colour vision deficiency (Harrower and Brewer, "
        "2003, The Cartographic Journal 40(1)).",
    )
