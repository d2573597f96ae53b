"""The snippets of the documentation: fenced blocks, with the language that they name."""

import re
from dataclasses import dataclass
from pathlib import Path

FENCE = re.compile(
    r"^(?P<indent> *)```(?P<info>[^\n`]*)\n(?P<text>.*?)^(?P=indent)```$", re.M | re.S
)


@dataclass(frozen=True)
class Snippet:
    """A fenced block.

    where : the page, below the root of the project, and the line
    info : what follows the fence: the language, then for a file its name
    """

    page: str
    line: int
    info: str
    text: str

    @property
    def where(self) -> str:
        return f"{self.page}:{self.line}"

    @property
    def language(self) -> str:
        return self.info.partition(" ")[0]

    @property
    def file_name(self) -> str | None:
        return self.info.partition(" ")[2] or None


def pages(root: Path) -> list[Path]:
    """What people read: of the examples first, because README.md looks at what they leave."""
    return [*sorted(root.glob("examples/*/README.md")), root / "README.md", root / "DEVELOPERS.md"]


def snippets(root: Path) -> list[Snippet]:
    """All fenced blocks of all pages, in the order in which they are run."""
    found = []
    for page in pages(root):
        text = page.read_text(encoding="utf-8")
        for match in FENCE.finditer(text):
            line = text.count("\n", 0, match.start()) + 1
            name = page.relative_to(root).as_posix()
            indent = match["indent"]
            body = re.sub(f"^{indent}", "", match["text"], flags=re.M)
            found.append(Snippet(name, line, match["info"].strip(), body))
    return found


def indented_blocks(text: str) -> list[str]:
    """First lines of blocks that are set as code by their indentation: nothing would run them."""
    without = FENCE.sub("", text)
    return re.findall(r"(?<=\n\n) {4,}(\S.*)", without)
