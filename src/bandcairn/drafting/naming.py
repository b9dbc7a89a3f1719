"""What a channel's name says of its kind: a guess, and told as one."""

from __future__ import annotations

import re
from dataclasses import dataclass

# Sites of the extended 10-20 system (ten-per-cent system), with the older T3 to T6.
# Oostenveld R., Praamstra P. (2001). The five percent electrode system for high-resolution EEG and ERP
# measurements. Clinical Neurophysiology 112, 713-719.
_SITE = (
    r"(?:Nz|Iz|Fp[z129]|Fp10|AF(?:[z1-9]|10)|F(?:[z1-9]|10)|F?T(?:[3-9]|10)|FC[z1-6]|C[z1-6]"
    r"|TP(?:[7-9]|10)|CP[z1-6]|P(?:[z1-9]|10)|PO(?:[z1-9]|10)|O(?:[z129]|10)|I[12])"
)
_REFERENCE = r"(?:A[12]|M[12]|REF|LE|RE|AVG|AR|CAR)"
_EEG_SITE = re.compile(rf"{_SITE}(?:[-_ :/](?:{_SITE}|{_REFERENCE}))?", re.IGNORECASE)
_REFERENCE_ALONE = re.compile(rf"{_REFERENCE}(?:[-_ :/]{_REFERENCE})?|GND|COM", re.IGNORECASE)
_LEAD = re.compile(r"(?:lead[ _-]?)?(?:I{1,3}|aV[RLF]|V[1-9]|ML(?:I{1,3}|V[1-9]))", re.IGNORECASE)
_MUSCLES = (
    r"biceps|triceps|brachioradialis|deltoid|deltoideus|trapezius|masseter|temporalis|"
    r"frontalis|corrugator|zygomaticus|orbicularis|mentalis|submental|chin|tibialis|"
    r"gastrocnemius|soleus|peroneus|vastus|quadriceps|hamstring|hamstrings|"
    r"semitendinosus|semimembranosus|gluteus|erector|multifidus|pectoralis|latissimus|"
    r"infraspinatus|supraspinatus|sternocleidomastoid|rectus|obliquus|flexor|extensor|"
    r"adductor|FDI|APB|ADM|SCM"
)
_MUSCLE = re.compile(rf"(?<![^\W\d_])(?:{_MUSCLES})(?![^\W\d_])", re.IGNORECASE)
# Words that say what a channel holds, and which kind that is; they weigh more than the rest of the name.
_WORDS = (
    (r"[HV]?EOG|LOC|ROC|E[12]-M[12]", "", "eye movements"),
    (r"TRIG(?:GER)?|STATUS|STI|MARKER|EVENT|SYNC|DIN", "", "triggers"),
    (r"RESP(?:IRATION)?|THOR(?:AX)?|ABDO(?:MEN)?|FLOW|AIRFLOW", "", "breathing"),
    (r"SPO2|SAO2|PPG|PLETH|PULSE", "", "pulse or oxygen"),
    (r"EDA|GSR|SCL|SCR", "", "skin conductance"),
    (
        r"ACC|GYRO?|ACCEL\w*|TEMP|POSITION|TIME|TIMESTAMP|SAMPLE|INDEX",
        "",
        "no voltage of brain, heart or muscle",
    ),
    (r"ECG|EKG", "ecg", "ECG in the name"),
    (r"EMG", "emg", "EMG in the name"),
)
_COMPILED = tuple(
    (re.compile(rf"(?<![^\W\d_])(?:{word})(?![^\W\d_])", re.IGNORECASE), kind, why)
    for word, kind, why in _WORDS
)
_EEG_PREFIX = re.compile(r"EEG(?=[\W\d_]|$)[\W_]*", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class KindGuess:
    """A kind of signal, empty where none is known, and what speaks for it."""

    kind: str
    why: str


def guess_kind(label: str) -> KindGuess:
    """Return what a channel's name says.

    Parameters
    ----------
    label : str
        Name of the channel.

    Returns
    -------
    KindGuess
    """
    bare = label.strip().rstrip(".")  # some exporters pad with points: "Fc5."
    for word, kind, why in _COMPILED:
        if word.search(bare):
            return KindGuess(kind, why)
    site = _EEG_PREFIX.sub("", bare, count=1)
    if _REFERENCE_ALONE.fullmatch(site):
        return KindGuess("", "reference")
    if site != bare:
        return KindGuess("eeg", "EEG in the name")
    return _by_place(bare)


def _by_place(bare: str) -> KindGuess:
    """Return what the name of a site, a lead or a muscle says."""
    if _EEG_SITE.fullmatch(bare):
        return KindGuess("eeg", "10-20 names")
    if _LEAD.fullmatch(bare):
        return KindGuess("ecg", "names of ECG leads")
    if _MUSCLE.search(bare):
        return KindGuess("emg", "names of muscles")
    return KindGuess("", "name not known")
