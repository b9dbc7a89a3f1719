"""What names of channels say."""

from __future__ import annotations

import pytest

from bandcairn.drafting.naming import guess_kind


@pytest.mark.parametrize(
    "label", ["Fz", "CZ", "Fp1", "T3", "AF7", "PO8", "C3-A2", "Fp1-F3", "EEG 7", "EEG Fz-Ref", "Fc5."]
)
def test_sites_and_prefixes_are_eeg(label: str) -> None:
    """Sites of the 10-20 system, with a reference or without, and whatever calls itself EEG."""
    assert guess_kind(label).kind == "eeg"


@pytest.mark.parametrize("label", ["ECG", "EKG1", "II", "aVF", "V5", "MLII", "Lead II", "ECG II"])
def test_leads_are_ecg(label: str) -> None:
    """Names of leads, and whatever calls itself ECG."""
    assert guess_kind(label).kind == "ecg"


@pytest.mark.parametrize("label", ["EMG", "EMG_left", "L biceps", "vastus_lateralis", "Chin1-Chin2", "FDI"])
def test_muscles_are_emg(label: str) -> None:
    """Names of muscles, and whatever calls itself EMG."""
    assert guess_kind(label).kind == "emg"


@pytest.mark.parametrize(
    "label",
    [
        "EOG left",
        "HEOG",
        "Status",
        "TRIG",
        "Resp",
        "SpO2",
        "GSR",
        "A1",
        "EEG A2",
        "age",
        "ch1",
        "time",
        "Fzx",
    ],
)
def test_everything_else_is_left_unused(label: str) -> None:
    """Eyes, triggers, breathing, references and unknown names make no signal."""
    guess = guess_kind(label)
    assert (guess.kind, bool(guess.why)) == ("", True)
