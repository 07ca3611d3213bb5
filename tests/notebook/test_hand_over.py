"""What is written can be read back; nothing is overwritten unasked, and nothing unsafe is handed over."""

from bench_examples import without_markup

import planner
from planner.export.folder import verify_set


def test_the_week_is_written_read_back_and_audited(on_bench, mission, plan, tmp_path):
    def act(bench):
        bench.hand_over.write.click()
        told = without_markup(bench.hand_over.written.value)
        assert told.startswith(f"✔ written to {tmp_path / 'out'}: battery.csv, contacts.csv")
        bench.hand_over.audit.click()
        assert without_markup(bench.hand_over.verdict.value) == f"✔ {len(plan.contacts)} contacts keep every limit"

    on_bench(act)
    assert verify_set(tmp_path / "out") == ()
    assert planner.audit(mission, tmp_path / "out" / "contacts.csv").safe


def test_another_week_is_replaced_only_when_asked(on_bench, tmp_path, flown_pass):
    def act(bench):
        hand_over = bench.hand_over
        hand_over.write.click()
        bench.desk.drop_pass(flown_pass.pass_id)
        assert "changed since it was written" in without_markup(hand_over.written.value)
        before = (tmp_path / "out" / "contacts.csv").read_bytes()
        hand_over.write.click()
        assert "holds a week already" in without_markup(hand_over.written.value)
        assert (tmp_path / "out" / "contacts.csv").read_bytes() == before
        hand_over.replace.value = True
        hand_over.write.click()
        assert "✔ written to" in without_markup(hand_over.written.value)
        assert flown_pass.pass_id.encode() not in (tmp_path / "out" / "contacts.csv").read_bytes()
        assert not hand_over.replace.value

    on_bench(act)


def test_a_week_that_breaks_a_rule_is_not_handed_over(on_bench, tmp_path):
    def act(bench):
        bench.what_if.fields["soc_floor_pct"].box.value = 79.0
        bench.hand_over.write.click()
        assert "a week that breaks rules is not handed over" in without_markup(bench.hand_over.written.value)

    on_bench(act)
    assert not (tmp_path / "out").exists()


def test_no_folder_and_no_file_are_refused_by_name(on_bench):
    def act(bench):
        bench.hand_over.folder.value = " "
        bench.hand_over.write.click()
        assert "into folder: must be the name of a folder" in without_markup(bench.hand_over.written.value)
        bench.hand_over.audit.click()
        assert "audit file: must be the path of a contacts.csv" in without_markup(bench.hand_over.verdict.value)

    on_bench(act)


def test_a_file_that_is_no_contacts_file_is_told_in_place(on_bench, tmp_path):
    (tmp_path / "odd.csv").write_text("colour,shape\nred,round\n")

    def act(bench):
        for name in ("odd.csv", "missing.csv"):
            bench.hand_over.file.value = str(tmp_path / name)
            bench.hand_over.audit.click()
            assert name in without_markup(bench.hand_over.verdict.value)
            assert bench.hand_over.show.disabled

    on_bench(act)


def test_an_unsafe_file_is_called_unsafe_and_can_be_shown(on_bench, tmp_path):
    def act(bench):
        bench.hand_over.write.click()
        bench.what_if.fields["soc_floor_pct"].box.value = 79.0
        bench.hand_over.audit.click()
        assert "UNSAFE:" in without_markup(bench.hand_over.verdict.value)
        bench.hand_over.show.click()
        assert not bench.desk.is_planned
        assert bench.desk.faults

    on_bench(act)


def test_files_that_are_no_week_are_not_overwritten_either(on_bench, tmp_path):
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "contacts.csv").write_text("somebody else's")

    def act(bench):
        bench.hand_over.write.click()
        assert "holds files already: tick" in without_markup(bench.hand_over.written.value)

    on_bench(act)
    assert (tmp_path / "out" / "contacts.csv").read_text() == "somebody else's"
