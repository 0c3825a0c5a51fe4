"""``perpend bench``."""

from perpend.cli import main


def test_the_check_asserts_every_answer_and_times_nothing(capsys):
    assert main(["bench", "--check"]) == 0
    printed = capsys.readouterr().out
    assert "numpy.linalg.qr" in printed
    assert "kernel path" in printed


def test_a_mistyped_option_is_named_with_the_one_meant(capsys):
    assert main(["bench", "--chek"]) == 2
    complaint = capsys.readouterr().err
    assert complaint.startswith("perpend bench: ")
    assert "did you mean --check?" in complaint
    assert complaint.count("\n") == 1
