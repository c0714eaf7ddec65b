from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from app.store import Store, open_store
from app.store.demonstration import demonstration_documents, seed
from app.store.document import SampleDocument


def test_an_empty_store_is_seeded_once_with_the_first_sample_on_top(folder: Path, store: Store) -> None:
    assert len(seed(store.samples)) == 2
    assert [line.name for line in store.samples.list()] == ["Demonstration crystal", "Second demonstration crystal"]
    assert seed(open_store(folder).samples) == ()
    for line in store.samples.list():
        store.samples.delete(line.sample_id)
    assert seed(store.samples) == ()


def test_a_store_with_work_in_it_is_not_seeded(store: Store, document: SampleDocument) -> None:
    store.samples.create(document)
    assert seed(store.samples) == ()
    assert len(store.samples.list()) == 1


def columns_of_the_cell(cell: tuple[float, ...]) -> np.ndarray:
    """a, b, c of a cell with α = γ = 90° as columns, x3 along c and x2 along b: plain trigonometry."""
    a, b, c, _, beta, _ = cell
    return np.array(
        [[a * np.sin(np.radians(beta)), 0, 0], [0, b, 0], [a * np.cos(np.radians(beta)), 0, c]],
    )


def unit_vector(columns: np.ndarray, text: str) -> np.ndarray:
    indices = np.array([float(index) for index in text.strip("[]()").split()])
    vector = columns @ indices if text.startswith("[") else np.linalg.inv(columns).T @ indices
    return vector / np.linalg.norm(vector)


@pytest.mark.parametrize(("which", "direction_sigma"), [(0, 0.7), (1, 1.0)])
def test_the_invented_readings_agree_with_the_invented_tensor(which: int, direction_sigma: float) -> None:
    # Invented data. Predictions by the definitions nᵀAn and 1/(nᵀA⁻¹n); a tilt's effect by a numerical derivative.
    document = demonstration_documents()[which]
    free = document.properties[0].tensor.free
    tensor = np.zeros((3, 3))
    for label, value in free.items():
        row, column = int(label[0]) - 1, int(label[1]) - 1
        tensor[row, column] = tensor[column, row] = value
    assert document.crystal.cell is not None
    columns = columns_of_the_cell(document.crystal.cell)

    def predict(kind: str, n: np.ndarray) -> float:
        return float(n @ tensor @ n if kind == "along" else 1 / (n @ np.linalg.inv(tensor) @ n))

    departures = []
    for reading in document.readings:
        n = unit_vector(columns, str(reading.direction))
        turned = [np.cross(axis, n) for axis in np.eye(3)]
        slopes = [(predict(reading.kind, n + 1e-5 * t) - predict(reading.kind, n - 1e-5 * t)) / 2e-5 for t in turned]
        assert reading.sigma is not None
        assert reading.direction_sigma == direction_sigma
        spread = np.hypot(reading.sigma, np.radians(direction_sigma) * np.linalg.norm(slopes))
        departures.append((reading.value - predict(reading.kind, n)) / spread)
    assert max(np.abs(departures)) < 3
    assert 0.3 < np.sqrt(np.mean(np.square(departures))) < 1.7


def test_the_samples_show_what_they_are_for() -> None:
    conductor, shrinker = demonstration_documents()
    values = conductor.properties[0].tensor.free
    assert min(values.values()) > 0
    assert {reading.kind for reading in conductor.readings} == {"along", "rod"}
    bars = [reading.bar for reading in conductor.readings]
    assert len(bars) == 14
    assert len(set(bars)) < len(bars)
    # Square roots of the covariance, in row order of the free cells 11, 13, 22, 33.
    covariance = conductor.properties[0].tensor.covariance
    assert covariance is not None
    assert np.allclose(np.sqrt(np.diag(covariance)), [0.08, 0.06, 0.2, 0.09])
    assert min(shrinker.properties[0].tensor.free.values()) < 0 < max(shrinker.properties[0].tensor.free.values())
