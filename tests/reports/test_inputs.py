"""What is read from the record's own copies of its input files."""

from reports.inputs import cells, measurands
from sequencer.model.findings import findings_text


def test_measurands_come_from_the_record_s_own_table() -> None:
    found = measurands(findings_text())
    assert found["charge.voltage"].per_cell
    assert not found["charge.cutoff"].per_cell
    changed = findings_text().replace(b"charger current at the moment it ends the charge", b"something else")
    assert measurands(changed)["charge.cutoff"].measures == "something else"


def test_files_of_another_version_cost_the_explanation_only() -> None:
    assert measurands(b"packmime: findings 99\nfindings: {}\n") == {}
    assert measurands(b"{broken") == {}
    assert cells(b"packmime: pack 1\ncells: many\n") is None
