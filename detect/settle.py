"""Which spots the chosen candidates of a view are: their centres and radii settled."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from detect.calibration import Calibration
from detect.judge import Judgement
from detect.outline import settle_outlines
from detect.plants import settle_plants
from detect.spots import Spots
from detect.view import View


def settled_spots(
    view: View,
    judgement: Judgement,
    rows: NDArray[np.intp],
    worth: Calibration,
    *,
    plants: bool,
) -> Spots:
    """Turn chosen regions into spots in photograph pixels.

    Parameters
    ----------
    view : View
    judgement : Judgement
        Of that view.
    rows : ndarray of int
        Candidates chosen.
    worth : Calibration
        What the model's doubt is worth in this picture.
    plants : bool
        Whether the regions are plants, which share out the leaf among them.

    Returns
    -------
    Spots
        One for each row, in their order.
    """
    contrast, chosen = judgement.contrast, judgement.candidates.where(rows)
    if plants:
        centres, radius = settle_plants(chosen, contrast.map, contrast.threshold)
    else:
        centres = np.column_stack([chosen.x, chosen.y])
        radius = np.sqrt(chosen.area / np.pi) * settle_outlines(chosen, contrast.map)
    x, y = view.to_photograph(centres[:, 0], centres[:, 1])
    return Spots.found_at(
        x,
        y,
        radius / view.shrink,
        contrast=chosen.contrast / contrast.noise,
        fill=chosen.fill,
        doubt=worth.applied(judgement.doubt[rows]),
    )
