"""Writing a GeoPackage: whole or not at all, other layers kept, clear refusals.

Source of the danger list: the project's platform notes, section 7.
"""

import contextlib
import hashlib
import sqlite3
import stat
import threading
from pathlib import Path

import numpy as np
import pytest

pytestmark = pytest.mark.usefixtures("qgis_app")

UTM = "EPSG:32633"


@pytest.fixture(scope="module")
def layers(qgis_app):
    """Give the room that reads and writes."""
    from heaveline.plugin import layers

    return layers


@pytest.fixture
def heard():
    """Give a feedback that keeps what it is told."""
    from qgis.core import QgsProcessingFeedback

    return QgsProcessingFeedback(False)


def write(path, tables, dress=None, project=None, feedback=None):
    from heaveline.plugin.layers import write_geopackage
    from qgis.core import (
        QgsCoordinateReferenceSystem,
        QgsCoordinateTransformContext,
        QgsProject,
    )

    return write_geopackage(
        path,
        tables,
        QgsCoordinateReferenceSystem(UTM),
        QgsCoordinateTransformContext(),
        dress,
        project or QgsProject(),
        feedback,
    )


def table(name, *rows):
    from heaveline.plugin.layers import Table

    return Table(name, list(rows))


def sections(*names):
    return table(
        "section_lines",
        *(([(0, 0), (9, i)], {"section_id": n}) for i, n in enumerate(names)),
    )


def opened(path, name):
    from qgis.core import QgsVectorLayer

    layer = QgsVectorLayer(f"{path}|layername={name}", name, "ogr")
    assert layer.isValid(), f"{name} in {path}"
    return layer


def names_in(path):
    with contextlib.closing(sqlite3.connect(path)) as database:
        rows = database.execute("select table_name from gpkg_contents").fetchall()
    return sorted(row[0] for row in rows if row[0] != "layer_styles")


def ids_in(path, name="section_lines"):
    return [f["section_id"] for f in opened(path, name).getFeatures()]


def names_beside(path):
    return sorted(p.name for p in path.parent.iterdir())


def sha(path):
    return hashlib.sha256(Path(path).read_bytes()).hexdigest()


@pytest.fixture
def target(tmp_path):
    """Give a GeoPackage with our section lines and a layer of the user's own."""
    path = tmp_path / "results.gpkg"
    write(path, [sections("old 1", "old 2")])
    from qgis.core import (
        QgsCoordinateTransformContext,
        QgsVectorFileWriter,
        QgsVectorLayer,
    )

    own = QgsVectorLayer(f"Point?crs={UTM}&field=note:string", "wells", "memory")
    options = QgsVectorFileWriter.SaveVectorOptions()
    options.layerName = "wells"
    options.actionOnExistingFile = (
        QgsVectorFileWriter.ActionOnExistingFile.CreateOrOverwriteLayer
    )
    done = QgsVectorFileWriter.writeAsVectorFormatV3(
        own, str(path), QgsCoordinateTransformContext(), options
    )
    assert done[0] == 0
    opened(path, "wells").saveStyleToDatabase("mine", "", True, "")
    with contextlib.closing(sqlite3.connect(path)) as database:
        database.execute("pragma journal_mode = delete").fetchone()
    return path


@contextlib.contextmanager
def nothing_changes(path, code, words=""):
    """Check that a write is refused, the file stays the same and nothing is left."""
    before, beside = sha(path), names_beside(path)
    with pytest.raises(ValueError, match=words or None) as caught:
        yield
    assert caught.value.code == code
    assert str(path) in str(caught.value)
    assert sha(path) == before
    assert names_beside(path) == beside


# ---- what comes out ----------------------------------------------------------------


def test_every_layer_comes_out_as_it_is_declared(tmp_path):
    """Names, geometry types, field types, aliases and CRS of all output layers."""
    from heaveline.plugin.fields import LAYERS
    from qgis.core import Qgis, QgsWkbTypes
    from qgis.PyQt.QtCore import QMetaType

    types = {
        "text": QMetaType.Type.QString,
        "integer": QMetaType.Type.LongLong,
        "real": QMetaType.Type.Double,
        "boolean": QMetaType.Type.Bool,
    }
    path = tmp_path / "all.gpkg"
    written = write(path, [table(name) for name in LAYERS])
    assert written.counts == dict.fromkeys(LAYERS, 0)
    assert names_in(path) == sorted(LAYERS)
    for name, spec in LAYERS.items():
        layer = opened(path, name)
        wkb = layer.wkbType()
        if spec.geometry is None:
            assert wkb == Qgis.WkbType.NoGeometry
        else:
            assert QgsWkbTypes.displayString(wkb).replace(" ", "") == spec.geometry
            assert layer.crs().authid() == UTM
        found = {f.name(): f.type() for f in layer.fields()}
        assert found.pop("fid") == QMetaType.Type.LongLong
        assert found == {f.name: types[f.type] for f in spec.fields}


def test_fields_carry_alias_and_comment_in_the_file():
    """Every field of every layer says in words what it is, with unit and sign."""
    from heaveline.plugin.fields import LAYERS

    for spec in LAYERS.values():
        assert len(set(spec.names)) == len(spec.names)
        assert {"run_id", "study", "fault"} <= set(spec.names)
        assert spec.title
        assert spec.abstract
        for own in spec.fields:
            assert own.alias, (spec.name, own.name)
            assert len(own.comment) > 10, (spec.name, own.name)


def test_unknown_values_are_null(tmp_path):
    """None, NaN and what is not given are NULL, never nought or NaN."""
    from qgis.core import NULL

    path = tmp_path / "r.gpkg"
    rows = [
        ((1, 2, 3), {"section_id": "S", "dip": float("nan"), "used": None}),
        (None, {"section_id": "S", "sigma_z": np.float64("nan")}),
    ]
    write(path, [table("picks", *rows)])
    features = list(opened(path, "picks").getFeatures())
    for feature in features:
        assert all(
            value == NULL or value is None
            for name, value in zip(feature.fields().names(), feature.attributes())
            if name not in ("fid", "section_id")
        )
    assert features[0].geometry().asWkt().replace(" ", "") == "PointZ(123)"
    assert features[1].geometry().isNull()
    with contextlib.closing(sqlite3.connect(path)) as database:
        query = "select dip, used, sigma_z, x from picks"
        assert set(database.execute(query).fetchall()) == {(None,) * 4}


def test_numpy_values_are_written_as_what_they_are(tmp_path):
    """Numbers and truth values of NumPy come back as plain ones."""
    values = {
        "x": np.float32(2.5),
        "used": np.bool_(True),
        "source_fid": np.int64(2**40),
        "name": np.str_("Bjørk"),
    }
    path = tmp_path / "r.gpkg"
    write(path, [table("picks", (np.array([1.0, 2.0, 3.0]), values))])
    feature = next(opened(path, "picks").getFeatures())
    found = [feature[n] for n in ("x", "used", "source_fid", "name")]
    assert found == [2.5, True, 2**40, "Bjørk"]


def test_coordinates_come_back_to_the_last_bit(tmp_path):
    """Lines and points keep their doubles, Z included."""
    rng = np.random.default_rng(1)
    line = rng.normal(5e6, 1e5, (40, 3))
    path = tmp_path / "r.gpkg"
    write(
        path,
        [
            table("predicted_fault_traces", (line, {"section_id": "S"})),
            table("picks_time", (line[0, :2], {"section_id": "S"})),
        ],
    )
    found = next(opened(path, "predicted_fault_traces").getFeatures()).geometry()
    assert np.array_equal([(p.x(), p.y(), p.z()) for p in found.vertices()], line)
    point = next(opened(path, "picks_time").getFeatures()).geometry().constGet()
    assert (point.x(), point.y(), point.is3D()) == (*line[0, :2], False)


@pytest.mark.parametrize(
    ("coordinates", "words"),
    [
        ([(0, 0, 1), (1, 1, np.nan)], "a coordinate is unknown"),
        ([(0, 0, 1)], "two points"),
        ([(0, 0), (1, 1)], "no LineStringZ"),
        ((0, 0, 1), "no LineStringZ"),
    ],
)
def test_lines_that_cannot_be_drawn_are_left_out_aloud(
    tmp_path, heard, coordinates, words
):
    """No Z of NaN is ever written; the row's name and the reason are told."""
    good = ([(0, 0, 1), (1, 1, 2)], {"trace_id": "F/S2", "section_id": "S2"})
    bad = (coordinates, {"trace_id": "F/S1", "section_id": "S1"})
    path = tmp_path / "r.gpkg"
    written = write(
        path, [table("predicted_fault_traces", bad, good)], None, None, heard
    )
    assert written.counts == {"predicted_fault_traces": 1}
    assert ids_in(path, "predicted_fault_traces") == ["S2"]
    assert len(written.left_out) == 1
    for text in (written.left_out[0], heard.textLog()):
        assert "F/S1 was not written" in text
        assert words in text


def test_a_value_for_no_field_is_an_error(target):
    """A row with an unknown name is not written without it."""
    with pytest.raises(ValueError, match="depth") as caught:
        write(target, [table("section_lines", (None, {"depth": 1.0}))])
    assert caught.value.code == "bad-row"
    assert ids_in(target) == ["old 1", "old 2"]


def test_names_with_signs_and_accents_are_written(tmp_path):
    """Folders and files with blanks, accents, #, % and ? are files like others."""
    folder = tmp_path / "Ørn #3 50% ?"
    folder.mkdir()
    path = folder / "störung & blöcke.gpkg"
    for name in ("first", "second"):
        write(path, [sections(name)])
        assert ids_in(path) == [name]
    assert names_beside(path) == [path.name]


# ---- what was there ----------------------------------------------------------------


def test_other_layers_and_styles_are_kept(target):
    """Only layers of our names are replaced."""
    write(target, [sections("new"), table("runs", (None, {"run_id": "r"}))])
    assert names_in(target) == ["runs", "section_lines", "wells"]
    assert ids_in(target) == ["new"]
    assert opened(target, "wells").fields().names() == ["fid", "note"]
    with contextlib.closing(sqlite3.connect(target)) as database:
        styles = database.execute("select f_table_name, styleName from layer_styles")
        assert styles.fetchall() == [("wells", "mine")]


def test_nothing_but_the_file_is_left(target):
    """No temporary file, journal or write-ahead log remains beside it."""
    write(target, [sections("new")])
    assert names_beside(target) == [target.name]


def test_each_layer_is_dressed_before_the_swap(target):
    """Styles are stored in the new file while the old one is still in its place."""
    seen = []

    def dress(layer):
        seen.append((layer.name(), layer.featureCount(), ids_in(target)))
        layer.saveStyleToDatabase("ours", "", True, "")

    write(target, [sections("new"), table("picks")], dress)
    old = ["old 1", "old 2"]
    assert seen == [("section_lines", 1, old), ("picks", 0, old)]
    layer = opened(target, "section_lines")
    assert layer.loadDefaultStyle()[1]
    assert names_beside(target) == [target.name]


def test_a_file_that_qgis_left_in_write_ahead_mode_is_written(target):
    """After a style was saved, the next one to open the file changes its header."""
    opened(target, "wells").saveStyleToDatabase("another", "", False, "")
    header = target.read_bytes()[:100]
    changed = []

    def dress(layer):
        opened(target, "wells")
        changed.append(target.read_bytes()[:100] != header)

    write(target, [sections("new")], dress)
    assert changed == [True]
    assert ids_in(target) == ["new"]


def test_open_layers_show_the_new_rows(target):
    """A layer that is open in the project for reading is no hindrance and follows."""
    from qgis.core import QgsProject

    project = QgsProject()
    layer = opened(target, "section_lines")
    project.addMapLayer(layer)
    assert len(list(layer.getFeatures())) == 2
    write(target, [sections("new 1", "new 2", "new 3")], None, project)
    assert [f["section_id"] for f in layer.getFeatures()] == ["new 1", "new 2", "new 3"]
    assert layer.featureCount() == 3


def test_open_layers_follow_a_write_in_the_background(target):
    """An algorithm of the toolbox writes in another thread; the layer follows."""
    from qgis.core import QgsApplication, QgsProject

    project = QgsProject()
    layer = opened(target, "section_lines")
    project.addMapLayer(layer)
    assert layer.featureCount() == 2
    repaints = []
    layer.repaintRequested.connect(lambda *_: repaints.append(1))
    thread = threading.Thread(
        target=write, args=(target, [sections("new")], None, project)
    )
    thread.start()
    thread.join()
    assert repaints == []
    QgsApplication.processEvents()
    assert repaints
    assert [f["section_id"] for f in layer.getFeatures()] == ["new"]
    assert layer.featureCount() == 1


# ---- failures ----------------------------------------------------------------------


def boom(*_, **__):
    raise OSError("the plug was pulled")


@pytest.mark.parametrize("step", ["_write_table", "_dress_and_check", "_swap"])
def test_a_failure_leaves_the_file_byte_for_byte(target, monkeypatch, step):
    """Whatever fails, at whatever step, the old file stays and nothing is left."""
    from heaveline.plugin.layers import writing

    with nothing_changes(target, "not-written", "the plug was pulled"):
        monkeypatch.setattr(writing, step, boom)
        write(target, [sections("new")])


def test_a_failing_style_leaves_the_file_byte_for_byte(target):
    """An error while dressing a layer reaches the caller as it is."""
    before = sha(target)

    def dress(layer):
        raise RuntimeError("no such symbol")

    with pytest.raises(RuntimeError, match="no such symbol"):
        write(target, [sections("new")], dress)
    assert sha(target) == before
    assert names_beside(target) == [target.name]


def test_a_failure_with_no_file_before_leaves_none(tmp_path, monkeypatch):
    """A first write that fails leaves an empty folder."""
    from heaveline.plugin.layers import writing

    monkeypatch.setattr(writing, "_swap", boom)
    with pytest.raises(ValueError, match="plug"):
        write(tmp_path / "r.gpkg", [sections("new")])
    assert list(tmp_path.iterdir()) == []


def test_rows_that_are_not_in_the_file_are_a_failure(target, monkeypatch):
    """The new file is counted before it takes the old one's place."""
    from heaveline.plugin.layers import writing

    original = writing._write_table
    monkeypatch.setattr(
        writing, "_write_table", lambda *a: (original(*a)[0] + 1, original(*a)[1])
    )
    with nothing_changes(target, "not-written", "has 1 of 2 rows"):
        write(target, [sections("new")])


@contextlib.contextmanager
def files_no_larger_than(size):
    """Let no file grow beyond a size, as on a disk without room."""
    import resource

    before = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, before[1]))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, before)


@pytest.mark.parametrize("extra", [-20000, 1000, 30000, 60000])
def test_a_disk_without_room_leaves_the_file_byte_for_byte(target, extra):
    """Room runs out while copying or while writing: refused, nothing half-written."""
    rows = [([(0, 0), (9, i)], {"section_id": "S" * 500}) for i in range(400)]
    room = files_no_larger_than(target.stat().st_size + extra)
    with nothing_changes(target, "not-written"), room:
        write(target, [table("section_lines", *rows), sections_again()])


def sections_again():
    return table("runs", *((None, {"run_id": "r" * 900}) for _ in range(200)))


def test_enough_room_is_enough(target):
    """The check above fails for want of room only."""
    rows = [([(0, 0), (9, i)], {"section_id": "S" * 500}) for i in range(400)]
    with files_no_larger_than(10_000_000):
        write(target, [table("section_lines", *rows), sections_again()])
    assert len(ids_in(target)) == 400


# ---- refusals ----------------------------------------------------------------------


def test_a_file_being_edited_is_refused(target):
    """Swapping it would lose the edits silently; after they are saved it goes."""
    from qgis.core import QgsProject

    project = QgsProject()
    layer = opened(target, "wells")
    project.addMapLayer(layer)
    layer.startEditing()
    with pytest.raises(ValueError, match="'wells' is being edited") as caught:
        write(target, [sections("new")], None, project)
    assert caught.value.code == "output-in-use"
    assert ids_in(target) == ["old 1", "old 2"]
    assert layer.commitChanges()
    project.clear()
    write(target, [sections("new")])
    assert ids_in(target) == ["new"]


@pytest.mark.parametrize("end", ["-wal", "-journal"])
def test_a_file_open_elsewhere_for_editing_is_refused(target, end):
    """A write-ahead log or a journal beside it says that another program writes."""
    (target.parent / (target.name + end)).write_bytes(b"x")
    with nothing_changes(target, "output-in-use", "another program"):
        write(target, [sections("new")])


def test_a_real_edit_session_of_another_program_is_refused(target):
    """A connection in write-ahead mode leaves its log beside the file."""
    with contextlib.closing(sqlite3.connect(target)) as other:
        other.execute("pragma journal_mode = wal").fetchone()
        other.execute("create table held (a)")
        other.commit()
        with pytest.raises(ValueError, match="-wal") as caught:
            write(target, [sections("new")])
        assert caught.value.code == "output-in-use"
    assert ids_in(target) == ["old 1", "old 2"]


def test_a_file_locked_by_another_program_is_refused(target, monkeypatch):
    """A lock is waited for some time, then the write is refused."""
    from heaveline.plugin.layers import writing

    monkeypatch.setattr(writing, "PATIENCE", 0.3)
    with contextlib.closing(sqlite3.connect(target, isolation_level=None)) as other:
        other.execute("begin exclusive")
        with pytest.raises(ValueError, match="locked") as caught:
            write(target, [sections("new")])
        assert caught.value.code == "output-in-use"
        other.execute("rollback")
    assert ids_in(target) == ["old 1", "old 2"]
    assert names_beside(target) == [target.name]


def test_a_file_changed_meanwhile_is_not_overwritten(target):
    """What another program saved while we wrote is kept."""

    def dress(layer):
        with contextlib.closing(sqlite3.connect(target)) as other:
            other.execute("create table theirs (a)")
            other.commit()

    with pytest.raises(ValueError, match="changed it") as caught:
        write(target, [sections("new")], dress)
    assert caught.value.code == "output-in-use"
    with contextlib.closing(sqlite3.connect(target)) as database:
        assert database.execute("select count(*) from theirs").fetchone() == (0,)


def test_a_read_only_file_is_refused(target):
    """A file marked read-only is not replaced, though the folder would allow it."""
    target.chmod(stat.S_IRUSR)
    try:
        with nothing_changes(target, "output-read-only", "read-only"):
            write(target, [sections("new")])
    finally:
        target.chmod(stat.S_IRUSR | stat.S_IWUSR)


def test_a_read_only_folder_is_refused(target, monkeypatch):
    """Where no file can be made beside the old one the message says so."""
    from heaveline.plugin.layers import writing

    def refuse(*_):
        raise PermissionError(13, "Permission denied")

    with nothing_changes(target, "output-read-only", "folder"):
        monkeypatch.setattr(writing, "_copy", refuse)
        write(target, [sections("new")])


@pytest.mark.skipif(not Path("/proc").is_dir(), reason="needs a folder none can write")
def test_a_folder_nobody_can_write_is_refused():
    """The system's own folder takes no file, not even from the superuser."""
    with pytest.raises(ValueError, match="/proc/r") as caught:
        write("/proc/r.gpkg", [sections("new")])
    assert caught.value.code == "not-written"


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("nowhere/r.gpkg", "folder does not exist"),
        ("r.shp", "End its name in .gpkg"),
        ("folder.gpkg", "it is a folder"),
    ],
)
def test_places_where_no_geopackage_can_be_are_refused(tmp_path, name, words):
    """The message names the file and says what to do."""
    (tmp_path / "folder.gpkg").mkdir()
    with pytest.raises(ValueError, match=words) as caught:
        write(tmp_path / name, [sections("new")])
    assert caught.value.code == "not-written"


def test_a_file_that_is_no_geopackage_is_kept(tmp_path):
    """Neither a text nor a plain database of that name is overwritten."""
    text, plain = tmp_path / "a.gpkg", tmp_path / "b.gpkg"
    text.write_text("my notes, not a database at all", encoding="utf-8")
    with contextlib.closing(sqlite3.connect(plain)) as database:
        database.execute("create table notes (a)")
        database.commit()
    for path in (text, plain):
        with nothing_changes(path, "not-written", "no GeoPackage"):
            write(path, [sections("new")])


# ---- where a file cannot be swapped -----------------------------------------------


@pytest.fixture
def no_swapping(monkeypatch):
    """Let no file take another's place, as on Windows while it is open."""

    def refuse(self, other):
        raise PermissionError(13, "Access is denied")

    monkeypatch.setattr(Path, "replace", refuse)


def test_an_open_file_gets_the_new_content(target, no_swapping):
    """The content is replaced in one transaction; readers keep their handle."""
    layer = opened(target, "section_lines")
    inode = target.stat().st_ino
    write(target, [sections("new")])
    assert target.stat().st_ino == inode
    assert ids_in(target) == ["new"]
    assert names_in(target) == ["section_lines", "wells"]
    assert names_beside(target) == [target.name]
    del layer


def test_a_new_file_is_made_where_none_can_be_moved(tmp_path, no_swapping):
    """Without an old file the content is copied into a new one."""
    write(tmp_path / "r.gpkg", [sections("new")])
    assert ids_in(tmp_path / "r.gpkg") == ["new"]
    assert names_beside(tmp_path / "r.gpkg") == ["r.gpkg"]


def test_an_open_and_locked_file_is_refused(target, no_swapping, monkeypatch):
    """Content that cannot be replaced in time leaves the file byte for byte."""
    from heaveline.plugin.layers import writing

    reader = sqlite3.connect(target, isolation_level=None)
    original = writing._check_unchanged

    def lock_then_check(*args):
        reader.execute("begin")
        reader.execute("select count(*) from wells").fetchone()
        original(*args)

    monkeypatch.setattr(writing, "PATIENCE", 0.3)
    monkeypatch.setattr(writing, "_check_unchanged", lock_then_check)
    before = sha(target)
    with pytest.raises(ValueError, match="locked") as caught:
        write(target, [sections("new")])
    reader.execute("rollback")
    reader.close()
    assert caught.value.code == "output-in-use"
    assert sha(target) == before
    assert ids_in(target) == ["old 1", "old 2"]
    assert names_beside(target) == [target.name]
