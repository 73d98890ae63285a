"""Toy plugin: pantry, cooking and serving. The runner must be able to run it without any physics."""

from __future__ import annotations

import threading
from dataclasses import dataclass
from typing import ClassVar

import pandas as pd

from shiftfix.api import Column, NodeSpec, Port, Table, hookimpl, param


@dataclass(frozen=True, eq=False, kw_only=True)
class Ingredients(Table):
    columns: ClassVar = (Column("name", "text", "what"), Column("mass_1", "float", "how much", minimum=0.0))


@dataclass(frozen=True, eq=False, kw_only=True)
class Dish(Table):
    columns: ClassVar = (Column("name", "text", "what"),)
    exit_code: int = 0


@dataclass(frozen=True)
class PantryParams:
    items: tuple[str, ...] = param("what is taken", default=("flour", "water"))
    portions: int = param("how many eat", default=2, minimum=1, maximum=12)
    cooling: float = param("how long it cools", default=60.0, unit="s", minimum=0.0, maximum=7200.0)
    size: float | None = param("size of the pot", default=None, unit="m")
    heat: str = param("how hot", default="low", choices=("low", "high"))
    salted: bool = param("whether salt is added", default=True)
    book: tuple = param("recipe files", default=(), path="files")


@dataclass(frozen=True)
class CookParams:
    misdeed: str = param("what the cook does wrong", default="")


gate = threading.Event()


def pantry(inputs, params, context):
    context.progress(0.5, "taking")
    return {
        "things": Ingredients(
            rows=pd.DataFrame({"name": list(params.items), "mass_1": [float(params.portions)] * len(params.items)})
        )
    }


def cook(inputs, params, context):
    things = inputs["things"]
    if params.misdeed == "raise":
        raise RuntimeError("the pot boils over")
    if params.misdeed == "import":
        raise ModuleNotFoundError("No module named 'saffron.threads'", name="saffron.threads")
    if params.misdeed == "own":
        raise ModuleNotFoundError("No module named 'toy.forks'", name="toy.forks")
    if params.misdeed == "name":
        raise ImportError("cannot import name 'ladle' from 'spoons.wood'", name="spoons.wood")
    if params.misdeed == "interrupt":
        raise KeyboardInterrupt
    if params.misdeed == "wait":
        gate.set()
        for _ in range(2000):
            context.check_cancelled()
            threading.Event().wait(0.005)
    if params.misdeed == "change":
        things[0].rows["mass_1"].array[:] = 99.0
    if params.misdeed == "wrong":
        return {"soup": things[0]}
    if params.misdeed == "surplus":
        return {"dish": Dish(rows=pd.DataFrame({"name": ["x"]})), "crumbs": None}
    if params.misdeed == "nothing":
        return None
    taste = context.random.integers(0, 10**9)
    context.logger.warning("the soup is hot")
    names = [str(n) for t in things for n in t.array("name")] + [f"taste {taste}"]
    return {"dish": Dish(rows=pd.DataFrame({"name": names}), exit_code=6 if params.misdeed == "ambiguous" else 0)}


def serve(inputs, params, context):
    context.write("menu.txt", "\n".join(inputs["dish"].array("name")) + "\n")
    if params.misdeed == "escape":
        context.write("../menu.txt", "x")
    return {}


@hookimpl
def shiftfix_nodes():
    return (
        NodeSpec("pantry", "take things", pantry, outputs={"things": Port(Ingredients, "things")}, params=PantryParams),
        NodeSpec(
            "cook",
            "make a dish",
            cook,
            inputs={"things": Port(Ingredients, "things", many=True)},
            outputs={"dish": Port(Dish, "dish")},
            params=CookParams,
        ),
        NodeSpec("serve", "write the menu", serve, inputs={"dish": Port(Dish, "dish")}, params=CookParams),
        NodeSpec(
            "twins",
            "two outputs",
            lambda i, p, c: {"a": None, "b": None},
            outputs={"a": Port(Ingredients, "first"), "b": Port(Ingredients, "second")},
        ),
    )
