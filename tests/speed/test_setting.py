"""The setting."""

from hvhost.speed.setting import Setting


def test_every_place_is_a_new_folder_and_the_scene_is_caught_once(setting: Setting) -> None:
    """Measurements never write into each other's folders."""
    first, second = setting.place(), setting.place()
    assert first != second
    assert not list(second.iterdir())
    assert setting.scene is setting.scene
