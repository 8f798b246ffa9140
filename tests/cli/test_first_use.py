"""What a first user of the program meets: each message is true, says where, and its way out works."""


def edit(folder, old, new):
    path = folder / "project.toml"
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))


def test_wrong_options_of_a_delivery_are_told_at_once_by_their_names(command, made, delivered):
    words = ("--layer", "transcritps", "--values", "count", "--samples-in", "row")
    code, _, err = command("add-block", "new", delivered["transcripts"], *words, "--project", made)
    assert code == 2
    assert "--layer: 'transcritps' is no layer; did you mean 'transcripts'?" in err
    assert "--values: 'count' is not allowed" in err
    assert "--samples-in: 'row' is not allowed; allowed: 'rows', 'columns'; did you mean 'rows'?" in err
    assert not (made / "blocks" / "new.h5ad").exists()


def test_a_layer_of_ones_own_is_taken_when_said_and_told(command, made, delivered):
    words = ("--layer", "transcritps", "--own-layer", "--values", "counts", "--project", made)
    code, out, err = command("add-block", "new", delivered["transcripts"], *words)
    assert code == 0, err
    assert "'transcritps' is one of your own" in out
    assert "own_layer = true" in (made / "project.toml").read_text()
    words = ("--layer", "transcripts", "--values", "counts", "--replace", "--project", made)
    assert command("add-block", "new", delivered["transcripts"], *words)[0] == 0
    assert "own_layer" not in (made / "project.toml").read_text()


def test_wrong_columns_are_told_beside_wrong_keys(command, made):
    edit(made, 'group = "group"', 'group = "grup"\ngrop = "x"')
    edit(made, 'values = "counts"', 'values = "count"')
    code, _, err = command("status", "--project", made)
    assert code == 2
    for piece in ("samples.grop: unknown key", "blocks.rna.values", "no column of samples.tsv 'grup'"):
        assert piece in err


def test_a_wrong_column_of_a_sheet_is_told_first_with_the_nearest(command, made, delivered):
    words = ("--group", "grup", "--adjust", "run_dya", "--replace", "--project", made)
    code, out, err = command("add-samples", delivered["samples"], *words)
    assert (code, out) == (2, "")
    assert "'grup' (did you mean 'group'?), 'run_dya' (did you mean 'run_day'?)" in err


def test_a_sheet_that_does_not_fit_the_settings_can_be_replaced(command, made, delivered):
    sheet = made / "samples.tsv"
    sheet.write_text(sheet.read_text().replace("group", "arm", 1))
    assert command("status", "--project", made)[0] == 2
    code, out, _ = command("add-samples", delivered["samples"], "--replace", "--project", made)
    assert (code, "columns: 1 gained ('group'), 1 lost ('arm')" in out) == (0, True)


def test_empty_cells_of_the_design_are_told_when_they_come_in(command, tmp_path):
    assert command("init", tmp_path / "study")[0] == 0
    rows = ["sample,arm,day", "S1,a,d1", "S2,,d1", "S3,b,d2", "S4,b,"]
    (tmp_path / "sheet.csv").write_text("\n".join(rows) + "\n")
    here = ("--project", tmp_path / "study")
    code, _, err = command("add-samples", tmp_path / "sheet.csv", "--group", "arm", *here)
    assert code == 0
    assert "column 'arm' (group) is empty for 1 sample: 'S2'; such a sample takes no part" in err
    (tmp_path / "t.csv").write_text("id,S1,S2,S3,S4\ng1,1,2,3,4\ng2,5,6,7,8\n")
    words = ("--layer", "lipids", "--values", "continuous", "--adjust", "day")
    code, out, err = command("add-block", "lip", tmp_path / "t.csv", *words, *here)
    assert code == 0, err
    assert "column 'day' (adjust) is empty for 1 sample: 'S4'" in out
