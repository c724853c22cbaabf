"""Text of a file reduced to known terms, so that nothing typed into a header can leave this room.

Each function takes the raw text and gives a term of a closed list, 'other' for a text that is not in it, or ''
for none. Lists written from memory of the standard's tables are open to additions: an unlisted term becomes
'other', which costs detail and nothing else.
"""

from __future__ import annotations

import re

from pydicom.config import IGNORE
from pydicom.uid import UID

from safecheck.dicom.pseudonyms import Pseudonyms

__all__ = [
    "BODY_PARTS",
    "MODALITIES",
    "NOT_A_NUMBER",
    "OTHER",
    "PHOTOMETRIC",
    "body_part",
    "decimal",
    "kernel",
    "loss_method",
    "manufacturer",
    "modality",
    "object_class",
    "photometric",
]

OTHER = "other"
NOT_A_NUMBER = "not a number"

# Defined Terms of PS3.3 C.7.3.1.1.1, retired ones included; from memory.
_MODALITIES_TEXT = """
ANN AR ASMT AU BDUS BI BMD CD CF CP CR CS CT CTPROTOCOL DD DF DG DM DMS DOC DS DX EC ECG EEG EMG EOG EPS
ES FA FID FS GM HC HD IO IOL IVOCT IVUS KER KO LEN LP LS M3D MA MG MR MS NM OAM OCT OP OPM OPR OPT OPTBSV
OPTENF OPV OSS OT PA PLAN POS PR PT PX REG RESP RF RG RTDOSE RTIMAGE RTINTENT RTPLAN RTRAD RTRECORD
RTSEGANN RTSTRUCT RWV SC SEG SM SMR SR SRF ST STAIN TEXTUREMAP TG US VA VF VL VIDD XA XAPROTOCOL XC
"""
MODALITIES = frozenset(_MODALITIES_TEXT.split())

# Body Part Examined terms of PS3.16 Annex L and what PS3.3 C.7.3.1.1.1 defined before it; from memory.
_BODY_PARTS_TEXT = """
ABDOMEN ABDOMENPELVIS ADRENAL ANKLE ANUS AORTA ARM AXILLA BACK BILEDUCT BLADDER BODY BRAIN BREAST BRONCHUS
BUTTOCK CALCANEUS CALF CAROTID CEREBELLUM CERVIX CHEEK CHEST CHESTABDOMEN CHESTABDPELVIS CIRCLEOFWILLIS
CLAVICLE COCCYX COLON CORNEA CORONARYARTERY CSPINE CTSPINE DUODENUM EAR ELBOW ESOPHAGUS EXTREMITY EYE
EYELID FACE FEMUR FINGER FOOT FOREARM GALLBLADDER HAND HEAD HEADNECK HEART HIP HUMERUS IAC ILEUM ILIUM JAW
JEJUNUM KIDNEY KNEE LARYNX LEG LIVER LOWEREXTREMITY LOWERLEG LSPINE LSSPINE LUNG MANDIBLE MAXILLA
MEDIASTINUM MOUTH NASALBONE NECK NECKCHEST NECKCHESTABDOMEN NECKCHESTABDPELV NOSE ORBIT OVARY PANCREAS
PAROTID PATELLA PELVIS PENIS PHARYNX PROSTATE RADIUS RADIUSULNA RECTUM RIB SACRUM SCALP SCAPULA SCLERA
SCROTUM SELLA SHOULDER SIJOINT SINUS SKULL SPINE SPLEEN SSPINE STERNOCLAVICULARJOINT STERNUM STOMACH
TESTIS THIGH THUMB THYMUS THYROID TIBIA TIBIAFIBULA TLSPINE TMJ TOE TONGUE TRACHEA TSPINE ULNA UMBILICUS
UPPERARM UPPEREXTREMITY URETER URETHRA UTERUS VAGINA VULVA WHOLEBODY WRIST ZYGOMA
"""
BODY_PARTS = frozenset(_BODY_PARTS_TEXT.split())

PHOTOMETRIC = frozenset(
    # PS3.3 C.7.6.3.1.2, retired ones included; from memory. XYB came with JPEG XL.
    (
        "MONOCHROME1",
        "MONOCHROME2",
        "PALETTE COLOR",
        "RGB",
        "ARGB",
        "CMYK",
        "HSV",
        "XYB",
        "YBR_FULL",
        "YBR_FULL_422",
        "YBR_PARTIAL_422",
        "YBR_PARTIAL_420",
        "YBR_ICT",
        "YBR_RCT",
    )
)

# Beginnings of Manufacturer as devices write it, folded to letters and digits; common practice, no source.
_MAKERS: tuple[tuple[str, str], ...] = (
    ("3DHISTECH", "3DHISTECH"),
    ("ACCURAY", "Accuray"),
    ("ACUSON", "Acuson"),
    ("ADAC", "ADAC"),
    ("AGFA", "Agfa"),
    ("ALOKA", "Aloka"),
    ("ATLULTRASOUND", "ATL"),
    ("BKMEDICAL", "BK Medical"),
    ("BRUKER", "Bruker"),
    ("CANON", "Canon"),
    ("CARESTREAM", "Carestream"),
    ("CARLZEISS", "Zeiss"),
    ("ZEISS", "Zeiss"),
    ("EASTMANKODAK", "Kodak"),
    ("KODAK", "Kodak"),
    ("ELEKTA", "Elekta"),
    ("ELSCINT", "Elscint"),
    ("EOSIMAGING", "EOS imaging"),
    ("ESAOTE", "Esaote"),
    ("FUJI", "Fujifilm"),
    ("GEMEDICAL", "GE"),
    ("GEHEALTHCARE", "GE"),
    ("GEVINGMED", "GE"),
    ("GENERALELECTRIC", "GE"),
    ("GEULTRASOUND", "GE"),
    ("HAMAMATSU", "Hamamatsu"),
    ("HEIDELBERG", "Heidelberg Engineering"),
    ("HITACHI", "Hitachi"),
    ("HOLOGIC", "Hologic"),
    ("LORAD", "Hologic"),
    ("IMSSRL", "IMS"),
    ("INTELERAD", "Intelerad"),
    ("KONICA", "Konica Minolta"),
    ("LEICA", "Leica"),
    ("LODOX", "Lodox"),
    ("LUMISYS", "Lumisys"),
    ("MARCONI", "Marconi"),
    ("MEDISO", "Mediso"),
    ("MINDRAY", "Mindray"),
    ("NEUSOFT", "Neusoft"),
    ("NIDEK", "Nidek"),
    ("OECMEDICAL", "OEC"),
    ("OLYMPUS", "Olympus"),
    ("OPTOVUE", "Optovue"),
    ("PHILIPS", "Philips"),
    ("PICKER", "Picker"),
    ("PLANMECA", "Planmeca"),
    ("PLANMED", "Planmed"),
    ("SAMSUNG", "Samsung"),
    ("MEDISON", "Samsung"),
    ("SHIMADZU", "Shimadzu"),
    ("SIEMENS", "Siemens"),
    ("SIRONA", "Sirona"),
    ("SWISSRAY", "Swissray"),
    ("TOPCON", "Topcon"),
    ("TOSHIBA", "Toshiba"),
    ("UIH", "United Imaging"),
    ("UNITEDIMAGING", "United Imaging"),
    ("VAREX", "Varex"),
    ("VARIAN", "Varian"),
    ("VATECH", "Vatech"),
    ("VIDAR", "Vidar"),
    ("ZIEHM", "Ziehm"),
)

# Convolution Kernel as scanners of the large makers write it; common practice, no source.
_KERNELS = re.compile(
    r"[A-Z][a-z]?\d{2}[a-z]?(?:\\[1-5])?"  # B30f, H31s, Br40d, I31f\3
    r"|STANDARD|SOFT|DETAIL|BONE|BONEPLUS|EDGE|LUNG|CHST|ULTRA|EXPERIMENTAL7|HD(?:STD|DTL|LUNG|BONE)PLUS"
    r"|\d{1,2}|FC\d{2}H?|FL\d{2}|[A-FL]|[CDEFUY][ABCDE]|EB|EC"
)
_DECIMAL = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[Ee][+-]?\d+)?")
_STANDARD_METHOD = re.compile(r"(?:ISO|IEC|ITU)_[0-9]{1,5}(?:_[0-9]{1,3})?")


def _folded(text: str) -> str:
    return re.sub(r"[^A-Z0-9]", "", text.upper())


def _one_of(text: str, known: frozenset[str]) -> str:
    word = text.strip().upper()
    return word if word in known or not word else OTHER


def modality(text: str) -> str:
    """Modality (0008,0060) as a Defined Term."""
    return _one_of(text, MODALITIES)


def photometric(text: str) -> str:
    """Photometric Interpretation (0028,0004) as a Defined Term."""
    return _one_of(text, PHOTOMETRIC)


def body_part(text: str) -> str:
    """Body Part Examined (0018,0015) as a Defined Term; blanks, hyphens and underscores do not count."""
    word = _folded(text)
    return word if word in BODY_PARTS or not text.strip() else OTHER


def manufacturer(text: str) -> str:
    """Name a known maker from Manufacturer (0008,0070)."""
    word = _folded(text)
    known = next((maker for start, maker in _MAKERS if word.startswith(start)), OTHER)
    return "GE" if word == "GE" else known if text.strip() else ""


def kernel(text: str, pseudonyms: Pseudonyms) -> str:
    r"""Convolution Kernel (0018,1210), values joined by '\': known forms as they are, any other keyed and short."""
    word = text.strip()
    if not word or _KERNELS.fullmatch(word):
        return word
    return pseudonyms.name("kernel", word)


def object_class(uid: str) -> str:
    """Name of a SOP class (PS3.6 Table A-1)."""
    known = UID(uid, IGNORE)
    if known.type == "SOP Class":
        return known.name
    return "private or unknown object class" if uid else ""


def loss_method(text: str) -> str:
    """Lossy Image Compression Method (0028,2114): terms formed like the standard's are carried through."""
    word = text.strip().upper()
    return word if not word or _STANDARD_METHOD.fullmatch(word) else OTHER


def decimal(text: str) -> str:
    """Return a decimal string as found, or 'not a number'."""
    word = text.strip()
    return word if not word or (len(word) <= 16 and _DECIMAL.fullmatch(word)) else NOT_A_NUMBER
