LOG = "time,pack_voltage_V\n2026-06-10T10:00:00Z,10.1\n2026-06-10T10:01:00Z,10.2\nrubbish\n"


def test_a_report_of_lines_and_an_import_that_can_be_taken_back(packfold):
    path = packfold.stocked().write("card.csv", LOG)
    (report,) = packfold("import", path, "--node", "ridge-east", "--format", "json").document
    assert (report["lines"], report["taken"], report["repeated"]) == (4, 2, 0)
    assert [row["line"] for row in report["set_aside"]] == [4]
    assert packfold("import", path, "--node", "ridge-east", "--format", "json").document[0]["repeated"] == 2
    assert "2 taken" in packfold("import", "--list").out
    assert packfold("import", "--undo", report["import_id"], "--format", "json").document["removed"] == 2
    assert "taken back" in packfold("import", "--list").out
    assert "taken back already" in packfold("import", "--undo", report["import_id"], code=2).err


def test_a_foreign_log_is_refused_with_an_example_and_read_with_a_mapping(packfold):
    path = packfold.stocked().write("foreign.csv", "when;volts\n10.06.2026 12:00;10,1\n")
    ran = packfold("import", path, "--node", "ridge-east", code=1)
    assert "mapping" in ran.err
    mapping = packfold.write(
        "map.toml",
        'delimiter = ";"\ndecimal = ","\n[time]\ncolumn = "when"\nformat = "%d.%m.%Y %H:%M"\ntimezone = "Europe/Berlin"\n'
        '[[columns]]\nname = "volts"\nquantity = "pack_voltage"\nunit = "V"\n',
    )
    ran = packfold("import", path, "--node", "ridge-east", "--map", mapping)
    assert "1 taken" in ran.out
    assert "2026-06-10T10:00:00.000Z,ridge-east,10.1" in packfold("export", "readings").out


def test_what_is_missing_is_said(packfold):
    packfold.stocked()
    assert "Name the files and their node" in packfold("import", code=2).err
    assert "cannot be read" in packfold("import", "none.csv", "--node", "ridge-east", code=2).err
