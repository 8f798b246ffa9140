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
