"""What of a process option determines its answers."""

from hashlib import sha256

from studies.process_file import ProcessFile

WORDS = ("title", "source", "does_not_claim")


def content_of(file: ProcessFile) -> dict[str, object]:
    """The option's values, and the hashes of the measured values it refers to."""
    measured = [sha256(path.read_bytes()).hexdigest() for path in file.measured_files()]
    return {"process": file.process.model_dump(), "measured": measured}


def same_process(first: ProcessFile, second: ProcessFile) -> bool:
    """Whether two options are the same but for what is said about them."""
    mine, other = content_of(first), content_of(second)
    for content in (mine, other):
        content["process"] = {key: value for key, value in content["process"].items() if key not in WORDS}
    return mine == other
