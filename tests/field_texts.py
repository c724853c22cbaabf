"""What each field of a document means: the words in the code where it has any, and those below where it has none."""

from __future__ import annotations

import ast
import functools
import inspect
import textwrap

from safecheck.documents import Document

__all__ = ["PLAN_UNITS", "text_of"]

PLAN_UNITS: dict[str, str] = {
    "CandidatePlan.ratio": "to 1",
    "WindowPlan.centre": "as `unit` says",
    "WindowPlan.width": "as `unit` says",
    "LimitPlan.at_most": "as `unit` says",
    "LimitPlan.at_least": "as `unit` says",
    "Claim.exceeding_at_most_percent": "% of patients",
    "Claim.confidence_percent": "%",
    "Allowed.refused_percent": "% of image files",
    "Allowed.excluded_percent": "% of files",
    "ControlPlan.share_percent": "% of frames",
}
"""Units of the plan's numbers."""

_PLAN: dict[str, str] = {
    "Plan.version": "Version of this document.",
    "Plan.change": "What is to be decided, by whom it was declared, and when.",
    "Plan.sample": "How the studies were drawn.",
    "Plan.scope": "Which inputs are subjects of the run.",
    "Plan.candidates": "Codecs at asked ratios, one table each; names made from their keys must differ.",
    "Plan.windows": "Display windows, one table each; label and modality together must differ.",
    "Plan.regions": "Where the drawn regions are.",
    "Plan.limits": "Bounds on measures, one table each; names must differ.",
    "Plan.claim": "What the sample is to show about patients not assessed.",
    "Plan.allowed": "How much may be left out.",
    "Plan.controls": "Which frames carry the dear controls.",
    "Scope.localizers": "Take localizers too.",
    "Scope.secondary_captures": "Take secondary captures too.",
    "CandidatePlan.codec": "A codec of the table below.",
    "CandidatePlan.basis": "What the ratio counts as the size before.",
    "WindowPlan.label": "How outputs name the window.",
    "WindowPlan.centre": "Window centre.",
    "WindowPlan.width": "Window width; at least 1 for `LINEAR`.",
    "WindowPlan.function": "VOI LUT Function of PS3.3 C.11.2.",
    "LimitPlan.name": "How outputs name the limit.",
    "LimitPlan.at_most": "Upper bound; for measures that are worse when higher.",
    "LimitPlan.at_least": "Lower bound; for measures that are worse when lower.",
    "LimitPlan.declared_on": "When it was declared.",
    "Claim.confidence_percent": "Confidence that the claim asks for. Bounds in the record are always at 95 %.",
    "ControlPlan.seed": "Another seed draws other frames.",
}

_RECORD: dict[str, str] = {
    "RecordDocument.schema_version": "Version of this format.",
    "RecordDocument.title": "Always `Recompression record`.",
    "RecordDocument.plan": "The plan as read, and its hash.",
    "RecordDocument.versions": "Versions of this program, Python and the libraries, by name.",
    "RecordDocument.selftest": "Which codecs worked on the machine of the run.",
    "RecordDocument.inputs": "Files by what became of them.",
    "RecordDocument.left_out": "Files left out, by side and reason.",
    "RecordDocument.strata": "Groups of like images.",
    "RecordDocument.candidates": "Candidates, and the delivered copies where there are any.",
    "RecordDocument.ledger": "Bytes and ratios.",
    "RecordDocument.figures": "Measures over frames.",
    "RecordDocument.outcomes": "Every limit held against every candidate.",
    "RecordDocument.controls": "Controls, by kind and codec.",
    "RecordDocument.controls_held": "False: the run is invalid.",
    "RecordDocument.worst_places": "Up to 3 frames per candidate and stratum with the largest patch RMSE.",
    "RecordDocument.worst_studies": "Up to 3 studies per candidate and stratum with the largest RMSE in content.",
    "RecordDocument.regions": "Regions over the frames that they cover.",
    "RecordDocument.regions_without_frame": (
        "Labels of regions that lie on no frame assessed, and what was refused of a DICOM object that carried regions."
    ),
    "RecordDocument.delivered": "Null where no copies were handed in.",
    "RecordDocument.cautions": "Cautions in full: those that always stand, then those that this run gave reason for.",
    "RecordDocument.exit_code": "That of the first condition; 0 where none holds.",
    "RecordDocument.exit_text": "The same in words.",
    "RecordDocument.tables": "The four tables with their hashes.",
    "PlanEntry.source": "Where it came from.",
    "PlanEntry.sha256": "Hash of the plan as read.",
    "CodecCheckEntry.codec": "Name of the codec.",
    "CodecCheckEntry.library": "Library that carries it.",
    "CodecCheckEntry.version": "Version that was found.",
    "CodecCheckEntry.available": "Whether it works there.",
    "CodecCheckEntry.reversible_exact": "Whether every sample came back; null for codecs that are not reversible.",
    "CodecCheckEntry.detail": "What was tried.",
    "InputCounts.files": "Original files, archive members counted one by one.",
    "InputCounts.assessed": "Of them assessed.",
    "InputCounts.excluded": "Of them excluded by rule.",
    "InputCounts.refused": "Of them refused.",
    "InputCounts.frames_assessed": "Frames assessed.",
    "InputCounts.frames_refused": "Frames refused.",
    "InputCounts.patients": "Patients with a file assessed.",
    "InputCounts.studies": "Studies with a file assessed.",
    "InputCounts.series": "Series with a file assessed.",
    "InputCounts.delivered_files": "Delivered files.",
    "InputCounts.delivered_assessed": "Of them taken in.",
    "InputCounts.delivered_excluded": "Of them excluded by rule.",
    "InputCounts.delivered_refused": "Of them refused.",
    "CountEntry.side": "Side of the run.",
    "CountEntry.status": "By rule, or for a doubtful pixel path.",
    "CountEntry.reason": "Reason code, see [exclusions](exclusions.md) and [pixel path](pixel_path.md).",
    "CountEntry.sentence": "The reason in words.",
    "CountEntry.files": "Files left out for it.",
    "StratumEntry.modality": "Modality.",
    "StratumEntry.unit": "Unit of its first frame.",
    "StratumEntry.bytes_now": "Bytes of its frames as they lie in the archive.",
    "StratumEntry.lossless_bytes": "Smallest reversible code of all its frames; null where a frame has none.",
    "CandidateEntry.codec": "Codec, or `delivered`.",
    "CandidateEntry.role": "Whether it was recompressed here or delivered by the archive.",
    "CandidateEntry.ratio_asked": "Ratio asked for, to 1; null for delivered copies.",
    "CandidateEntry.basis": "Basis of that ratio; empty for delivered copies.",
    "CandidateEntry.archive_can_write": "Whether a DICOM transfer syntax exists for the codec.",
    "LedgerEntry.bits_stored_bytes": "Size of all frames on the bits-stored basis, in bytes.",
    "LedgerEntry.bits_allocated_bytes": "The same on the bits-allocated basis.",
    "LedgerEntry.content_bytes": "Bits stored of the content alone, in bytes; null without content.",
    "LedgerEntry.lossless_bytes": "Smallest reversible codes of all frames, in bytes; null where a frame has none.",
    "LedgerEntry.bytes_now": "Bytes as they lie in the archive.",
    "LedgerEntry.code_bytes": "Bytes of all code streams.",
    "LedgerEntry.ratio_bits_stored": "Total on the bits-stored basis over the code, to 1.",
    "LedgerEntry.ratio_bits_allocated": "Total on the bits-allocated basis over the code, to 1.",
    "LedgerEntry.ratio_content": "Total of the content over the code, to 1; null without content.",
    "LedgerEntry.times_smaller_than_lossless": "Reversible codes over the code, times; null where a frame has none.",
    "LedgerEntry.times_smaller_than_now": "Bytes in the archive over the code, times.",
    "LedgerEntry.bits_per_pixel": "Bits of code per pixel.",
    "LedgerEntry.ratio_bits_stored_least": "Least ratio of a frame on the bits-stored basis.",
    "LedgerEntry.ratio_bits_stored_median": "Median over frames.",
    "LedgerEntry.ratio_bits_stored_largest": "Largest ratio of a frame.",
    "LedgerEntry.ratio_bits_stored_p05": "5th percentile over frames.",
    "LedgerEntry.ratio_bits_stored_p95": "95th percentile over frames.",
    "LedgerEntry.dial_largest": "Largest value of it.",
    "LedgerEntry.neighbour": "The other of two settings around the ratio; null where there is none.",
    "SpreadEntry.median": "Over frames.",
    "SpreadEntry.p05": "5th percentile over frames.",
    "SpreadEntry.p95": "95th percentile over frames.",
    "SpreadEntry.least": "Least of a frame.",
    "SpreadEntry.largest": "Largest of a frame.",
    "NeighbourEntry.dial_least": "Least value of the codec's dial.",
    "NeighbourEntry.dial_largest": "Largest value of it.",
    "NeighbourEntry.code_bytes": "Bytes of the neighbours' code streams.",
    "NeighbourEntry.ratio_bits_stored_least": "Least ratio of a frame on the bits-stored basis.",
    "NeighbourEntry.ratio_bits_stored_median": "Median over frames.",
    "NeighbourEntry.ratio_bits_stored_largest": "Largest ratio of a frame.",
    "ReversibleEntry.codec": "Reversible codec.",
    "ReversibleEntry.frames": "Frames counted.",
    "ReversibleEntry.bits_stored_bytes": "Size of these frames on the bits-stored basis, in bytes.",
    "ReversibleEntry.code_bytes": "Bytes of the codec's code streams.",
    "ReversibleEntry.ratio_bits_stored": "The first over the second, to 1.",
    "CarriageEntry.codec": "Codec.",
    "CarriageEntry.bits_stored": "Bits stored of the image.",
    "CarriageEntry.signed": "Whether its samples are signed.",
    "FigureEntry.without_value": "Frames without a value.",
    "FigureEntry.median": "Median over frames; null without values.",
    "FigureEntry.p05": "5th percentile over frames; null without values.",
    "FigureEntry.p95": "95th percentile over frames; null without values.",
    "FigureEntry.least": "Least value; null without values.",
    "FigureEntry.largest": "Largest value; null without values.",
    "EqualDamageEntry.unit": "Unit of the measure, that of `reference_value`.",
    "OutcomeEntry.limit": "Name of the limit.",
    "OutcomeEntry.side": "Side of the bound.",
    "OutcomeEntry.bound": "The bound, in `unit`.",
    "OutcomeEntry.declared_by": "Role of its author.",
    "OutcomeEntry.declared_on": "Date in ISO 8601.",
    "OutcomeEntry.outcome": "Outcome in words.",
    "OutcomeEntry.values": "Values held against the bound.",
    "OutcomeEntry.values_outside": "Of them outside.",
    "OutcomeEntry.values_missing": "Values that could not be computed, or are infinite because nothing changed.",
    "OutcomeEntry.studies": "Studies with a value.",
    "OutcomeEntry.studies_within": "Of them without any value outside.",
    "OutcomeEntry.patients": "Patients with a value.",
    "OutcomeEntry.patients_within": "Of them without any value outside.",
    "OutcomeEntry.upper_bound_percent": (
        "Exact one-sided 95 % upper bound on the share of patients with an exceedance; null without a random sample."
    ),
    "OutcomeEntry.worst_value": "Worst value, with its sign; null without values.",
    "OutcomeEntry.worst": "Frame of the worst value; null without values.",
    "OutcomeEntry.over_compressed_also_within": (
        "True: the over-compressed control is within the limit too, so the limit tells nothing; null where that "
        "control has no value in its scope."
    ),
    "ControlEntry.control": "Kind of control.",
    "ControlEntry.held": "Frames on which it was held.",
    "ControlEntry.not_held": "Frames on which it was not.",
    "ControlEntry.first_not_held": "First place where it was not held; null where all were.",
    "WorstPlaceEntry.value": "The value there.",
    "WorstPlaceEntry.rows": "Rows of the frame.",
    "WorstPlaceEntry.size_rows": "Rows of the patch.",
    "WorstPlaceEntry.may_show_text": "Burned-in text is declared or likely, so no crop is written.",
    "WorstStudyEntry.frames": "Frames of the study in this stratum.",
    "WorstStudyEntry.largest": "Value of its worst frame.",
    "RegionEntry.label": "Label that its author gave.",
    "RegionEntry.role": "Role that its author gave.",
    "RegionEntry.area_pixels": "Mean over frames of the exact area, in pixels.",
    "RegionEntry.area_mm2": "The same in mm²; null without a pixel spacing.",
    "RegionEntry.rmse_median": "Median over frames of the RMSE.",
    "RegionEntry.rmse_largest": "Largest RMSE of a frame.",
    "RegionEntry.bias_median": "Median over frames of the mean error.",
    "RegionEntry.bias_largest_absolute": "Largest size of the mean error of a frame.",
    "RegionEntry.max_largest": "Largest absolute error of any frame.",
    "RegionEntry.mean_before": "Mean over frames of the mean before.",
    "RegionEntry.mean_after": "Mean over frames of the mean after.",
    "RegionEntry.sd_before": "Mean over frames of the standard deviation before.",
    "RegionEntry.sd_after": "Mean over frames of the standard deviation after.",
    "RegionEntry.background": "Name of the background region, or empty.",
    "RegionEntry.cnr_before": "Mean over frames of the CNR before; null without a background.",
    "RegionEntry.cnr_after": "Mean over frames of the CNR after; read beside the noise removed.",
    "RegionEntry.noise_removed_percent": "Mean over frames of the share of the background's SD that is gone, in %.",
    "RegionEntry.worst": "Place of the largest absolute error.",
    "DeliveredEntry.pairs": "Originals with their copy.",
    "DeliveredEntry.originals_without_copy": "Originals for which no copy was found.",
    "DeliveredEntry.copies_without_original": "Copies for which no original was found.",
    "DeliveredEntry.matched_by": "Pairs by how they were matched.",
    "DeliveredEntry.expectations": "What the copies' headers say beside what the standard asks.",
    "Condition.code": "Exit code.",
    "Condition.text": "The same in words.",
    "TableEntry.table": "Name of the table.",
    "TableEntry.file": "File in the dossier.",
    "TableEntry.sha256": "SHA-256 of that file.",
    "TableEntry.rows": "Number of rows.",
    "Place.row": "Row within the frame, from 0; null where the place is the whole frame.",
    "Place.column": "Column within the frame, from 0; null where the place is the whole frame.",
    "Place.slice_position_mm": "Position along the normal of the image plane, in mm; null where it is not known.",
    "Place.series_number": "Series Number as declared; null where absent.",
    "Place.instance_number": "Instance Number as declared; null where absent.",
    "Place.frame": "Frame number, from 1.",
    "ExpectationEntry.attribute": "Name and tag of the attribute.",
    "ExpectationEntry.asked": "What the standard asks of an irreversibly compressed copy.",
    "ExpectationEntry.as_asked": "Copies that agree.",
    "ExpectationEntry.not_as_asked": "Copies that do not.",
    "DeliveredPairEntry.original": "The original's frame.",
    "DeliveredPairEntry.ratio_bits_allocated": "Achieved ratio on the bits-allocated basis, to 1.",
    "DeliveredPairEntry.ratio_bits_stored": "Achieved ratio on the bits-stored basis, to 1.",
    "DeliveredPairEntry.max_frame": "Largest absolute error over the frame, in `unit`.",
    "DeliveredPairEntry.rmse_frame": "RMSE over the frame, in `unit`.",
}

_OTHERS: dict[str, str] = {
    "RunFacts.started": "When the run was first begun.",
    "RunFacts.finished": "When its record was written.",
    "CropDocument.first_column": "Column of the frame where the crop begins.",
    "CropDocument.patch_column": "First column of the patch, counted in the frame.",
    "CropDocument.patch_rows": "Rows of the patch.",
    "CropDocument.patch_columns": "Columns of the patch.",
    "CropDocument.rows": "Rows of the crop.",
    "CropDocument.columns": "Columns of the crop.",
    "SealedFile.size_bytes": "Size in bytes.",
    "SealedFile.sha256": "SHA-256 of its bytes.",
    "RegionFile.version": "Version of this document.",
    "RegionFile.regions": "The regions; names must differ.",
    "RegionEntry.parts": "Shapes with their place; together they are the region.",
    "Part.placement": "Where the shape lies: on pixels of frames, or in the patient.",
    "Part.shape": "The shape, in pixels or millimetres as its placement says.",
    "Rectangle.centre": "Row and column, or both lengths along the plane's axes, of the centre.",
    "Ellipse.centre": "Row and column, or both lengths along the plane's axes, of the centre.",
}

_ANYWHERE: dict[str, str] = {
    "schema_version": "Version of this format.",
    "patient": "Pseudonym.",
    "study": "Pseudonym.",
    "series": "Pseudonym.",
    "instance": "Pseudonym.",
    "patients": "Patients.",
    "studies": "Studies.",
    "frames": "Frames counted.",
    "stratum": "Group of like images.",
    "candidate": "Name of the candidate.",
    "codec": "Codec.",
    "status": "Only proposed candidates decide the exit code.",
    "measure": "Name in the table of measures.",
    "unit": "Unit of the figures.",
    "rank": "1 for the worst.",
    "place": "Where it was found.",
    "region": "Name in the region file.",
    "name": "How outputs and other regions name it.",
    "label": "What people read.",
    "role": "What the region is for.",
    "kind": "Which of the kinds this is.",
    "columns": "Columns of the frames it lies on.",
    "series_number": "Only on the series of this number; null for all.",
    "first_instance_number": "Only from this Instance Number on; null for all.",
    "last_instance_number": "Only to this Instance Number; null for all.",
}

_TEXTS = _PLAN | _RECORD | _OTHERS


@functools.cache
def _in_code(model: type[Document]) -> dict[str, str]:
    """Field -> the docstring that follows it in the code, inherited fields included."""
    found: dict[str, str] = {}
    for base in reversed(model.__mro__):
        if not (issubclass(base, Document) and base is not Document):
            continue
        tree = ast.parse(textwrap.dedent(inspect.getsource(base))).body[0]
        assert isinstance(tree, ast.ClassDef)
        for field, said in zip(tree.body, tree.body[1:], strict=False):
            if isinstance(field, ast.AnnAssign) and isinstance(field.target, ast.Name) and isinstance(said, ast.Expr):
                assert isinstance(said.value, ast.Constant)
                found[field.target.id] = " ".join(str(said.value.value).replace("None", "null").split())
    return found


def text_of(model: type[Document], field: str) -> str:
    """The meaning of a field.

    Raises
    ------
    KeyError
        If neither the code nor this module has any.
    """
    own = f"{model.__name__}.{field}"
    if own in _TEXTS:
        return _TEXTS[own]
    return _in_code(model).get(field) or _ANYWHERE[field]
