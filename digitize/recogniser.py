"""Short printed words read by a recogniser whose model ships inside its wheel.

Each crop gives the network's letter probabilities; from them come the free reading and, for a
closed set of names, the probability of each (connectionist temporal classification), so that a
lead label is soft evidence rather than a guess at letters. Nothing is fetched at run time.
"""

from functools import lru_cache
from importlib import resources

import cv2
import numba
import numpy as np

HEIGHT_PX = 48  # what the network was trained on
NARROWEST_PX = 48
BATCH = 8


class Recogniser:
    """The network and its alphabet.

    References
    ----------
    Graves et al., Connectionist temporal classification, ICML 2006.
    """

    def __init__(self) -> None:
        import onnxruntime

        models = resources.files("rapidocr") / "models"
        model = next(m for m in sorted(models.iterdir(), key=str) if "_rec_" in m.name)
        options = onnxruntime.SessionOptions()
        options.intra_op_num_threads = options.inter_op_num_threads = 1
        options.log_severity_level = 3
        self._session = onnxruntime.InferenceSession(
            model.read_bytes(), options, providers=["CPUExecutionProvider"]
        )
        letters = self._session.get_modelmeta().custom_metadata_map["character"].splitlines()
        self._alphabet = ["", *letters, " "]
        self._index = {letter: k for k, letter in enumerate(self._alphabet)}

    def probabilities(self, crops: list[np.ndarray]) -> list[np.ndarray]:
        """Letter probabilities (steps, letters) of each crop: dark print on light, uint8."""
        scaled = [_scaled(crop) for crop in crops]
        order = sorted(range(len(crops)), key=lambda k: scaled[k].shape[1])
        found: dict[int, np.ndarray] = {}
        for start in range(0, len(order), BATCH):
            batch = order[start : start + BATCH]
            width = max(scaled[k].shape[1] for k in batch)
            images = np.full((len(batch), HEIGHT_PX, width), 255, np.float32)
            for row, k in enumerate(batch):
                images[row, :, : scaled[k].shape[1]] = scaled[k]
            images = (images / 255 - 0.5) / 0.5
            tensor = np.repeat(images[:, None], 3, axis=1)
            out = self._session.run(None, {self._session.get_inputs()[0].name: tensor})[0]
            found.update(zip(batch, out, strict=True))
        return [found[k] for k in range(len(crops))]

    def text(self, probabilities: np.ndarray) -> tuple[str, float]:
        """The likeliest free reading of a crop and its mean letter probability."""
        best = probabilities.argmax(axis=1)
        keep = (best > 0) & (np.diff(best, prepend=-1) != 0)
        if not keep.any():
            return "", 0.0
        word = "".join(self._alphabet[k] for k in best[keep])
        return word, float(probabilities.max(axis=1)[keep].mean())

    def likelihood(self, probabilities: np.ndarray, name: str) -> float:
        """Log probability that the crop says `name`, over all alignments."""
        states = np.zeros(2 * len(name) + 1, np.int64)
        states[1::2] = [self._index[c] for c in name]
        return float(_all_alignments(np.log(probabilities[:, states] + 1e-12), states))


@numba.njit(cache=True)
def _all_alignments(p: np.ndarray, states: np.ndarray) -> float:
    """Forward recursion of the classification, (steps, states) log probabilities in."""
    alpha = np.full(len(states), -np.inf)
    alpha[:2] = p[0, :2]
    for t in range(1, len(p)):
        for k in range(len(states) - 1, -1, -1):  # downward: what is read is still of step t - 1
            total = alpha[k]
            if k > 0:
                total = np.logaddexp(total, alpha[k - 1])
            if k > 1 and states[k] != 0 and states[k] != states[k - 2]:
                total = np.logaddexp(total, alpha[k - 2])
            alpha[k] = total + p[t, k]
    return np.logaddexp(alpha[-1], alpha[-2])


@lru_cache(maxsize=1)
def recogniser() -> Recogniser:
    """The recogniser, loaded once."""
    return Recogniser()


def _scaled(crop: np.ndarray) -> np.ndarray:
    """The crop at the network's height, its width rounded up to whole steps with paper."""
    width = max(8, round(crop.shape[1] * HEIGHT_PX / crop.shape[0]))
    image = cv2.resize(crop, (width, HEIGHT_PX), interpolation=cv2.INTER_AREA)
    padded = max(NARROWEST_PX, -(-width // 16) * 16)
    left = (padded - width) // 2
    return cv2.copyMakeBorder(
        image, 0, 0, left, padded - width - left, cv2.BORDER_CONSTANT, value=255
    )
