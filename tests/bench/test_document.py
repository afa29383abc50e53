"""The file's blocks: every key documented, defaults that are the stated ones."""

from pydantic import BaseModel

from hvhost.bench import document
from hvhost.bench.document import ArcsBlock, BenchFile, LeaseBlock, LowerBlock, PortBlock
from hvhost.words.fields import Block


def test_defaults_are_the_protocols() -> None:
    """Lease 500 ms (100 ms to 2 s), lower at most 10 s, re-strike time 20 ms where the file says nothing."""
    lease = LeaseBlock()
    assert (lease.time, lease.shortest, lease.longest) == (0.5, 0.1, 2.0)
    assert LowerBlock.model_fields["longest"].default == 10.0
    assert ArcsBlock.model_fields["restrike"].default == 0.02
    assert PortBlock.model_fields["baud"].default == 1_000_000


def test_every_block_is_strict_closed_and_explained() -> None:
    """Each block refuses unknown keys, is frozen, and has a sentence that the schema shows."""
    blocks = [b for b in vars(document).values() if isinstance(b, type) and issubclass(b, BaseModel) and b is not Block]
    assert len(blocks) > 25
    for block in blocks:
        assert block.model_config["extra"] == "forbid"
        assert block.model_config["strict"] is True
        assert block.model_config["frozen"] is True
        assert (block.__doc__ or "").strip()


def test_safety_relevant_keys_have_no_default() -> None:
    """What decides about safety must be written down: no key about wiring has a default."""
    for name in ("interlock", "cut_path", "danger_signal", "ground", "inputs", "bleed", "limits", "ceilings"):
        assert BenchFile.model_fields[name].is_required()
    for block in (document.InterlockBlock, document.DangerSignalBlock, document.InputsBlock):
        assert all(field.is_required() for field in block.model_fields.values())
    assert document.CutPathBlock.model_fields["means"].is_required()
    assert document.CutPathBlock.model_fields["inhibits_without_mcu"].is_required()
