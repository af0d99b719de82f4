"""ROS 1 bags, and ROS 2 bags that are folders."""

from functools import partial

from stillbench.foundation.errors import LogError
from stillbench.logs.arrays import ArrayTable
from stillbench.logs.contents import Contents
from stillbench.logs.formats import Format, missing_library
from stillbench.logs.messages import chosen_topic, read_messages
from stillbench.vocabulary.log_sheet import LogSection

MAGIC = b"#ROSBAG V2.0"


def read_bag(contents: Contents, section: LogSection) -> ArrayTable:
    """Read one topic of a bag.

    Raises
    ------
    LogError
        When the library is missing, the bag is damaged, or the topic cannot be told.
    """
    try:
        from rosbags.highlevel import AnyReader  # noqa: PLC0415  an extra
        from rosbags.typesys import Stores, get_typestore  # noqa: PLC0415
    except ImportError as error:
        raise missing_library(f"{contents.name!r} is a ROS bag: reading it", "rosbags", "bags") from error
    if contents.path is None:
        raise LogError(f"{contents.name!r} is a compressed bag", "a plain bag", "expand it first")
    try:
        store = None if bytes(contents.data[: len(MAGIC)]) == MAGIC else get_typestore(Stores.LATEST)
        with AnyReader([contents.path], default_typestore=store) as bag:
            topics = {connection.topic: connection.msgtype for connection in bag.connections}
            counts: dict[str, int] = {}
            for connection in bag.connections:
                counts[connection.topic] = counts.get(connection.topic, 0) + connection.msgcount
            topic = chosen_topic(topics, counts, section.dataset, contents.name)
            chosen = [connection for connection in bag.connections if connection.topic == topic]
            return read_messages(
                (
                    (instant, partial(bag.deserialize, body, connection.msgtype))
                    for connection, instant, body in bag.messages(connections=chosen)
                ),
                f"ROS bag, topic {topic}, {topics[topic]}",
                contents.name,
            )
    except LogError:
        raise
    except Exception as error:  # the library's own tree of errors, and those of the database
        reason = str(error).split("\n", maxsplit=1)[0][:80]
        raise LogError(
            f"{contents.name!r} cannot be read as a bag ({reason})", "a whole bag", "fetch it again"
        ) from error


def _recognizes(contents: Contents) -> bool:
    return bytes(contents.data[: len(MAGIC)]) == MAGIC or contents.folder


FORMAT = Format(("rosbag",), _recognizes, read_bag)
