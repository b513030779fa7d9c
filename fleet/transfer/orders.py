"""Supply orders behind the lines of supply.csv: made with their first line, corrected by an update."""

from __future__ import annotations

from typing import Any

from fleet.models import SupplyOrder
from fleet.models.codes import natural_key
from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.matching import DIFFERENT
from fleet.transfer.staging import as_day, fetch
from fleet.transfer.writing_sql import Numbers

ORDERS = SupplyOrder._meta.db_table
# The last line of an order in the file tells; all of them must say the same.
SAID = """
SELECT mine.row, book.code, mine.order_id, mine.supplier, mine.ordered_on, book.supplier, book.ordered_on
FROM {stage} AS mine JOIN {orders} AS book ON book.id = mine.order_id WHERE mine.order_id > 0 AND mine.bad = 0
ORDER BY mine.row
"""


def check_orders(kind: FileKind, job: Job) -> None:
    """What the lines say of orders that the book has: the same, or an update, and one thing only."""
    supplier_given = "supplier" in job.present.get(kind.name, ())
    said: dict[int, tuple[Any, Any]] = {}
    for row, code, order, supplier, day, book_supplier, book_day in fetch(SAID.format(stage=kind.stage, orders=ORDERS)):
        mine = (supplier if supplier_given else book_supplier, as_day(day))
        if said.setdefault(order, mine) != mine:
            job.say(kind, row, "order", code, "has lines that say different days or suppliers. Correct one of them.")
            continue
        for column, ours, book in (("supplier", mine[0], book_supplier), ("ordered_on", mine[1], as_day(book_day))):
            if ours != book and not job.update:
                job.say(kind, row, column, ours, DIFFERENT.format(book=f"“{book or 'nothing'}”"))
    book_orders = {order.pk: order for order in SupplyOrder.objects.filter(pk__in=said)}
    job.changed_orders = {
        pk: values for pk, values in said.items() if values != (book_orders[pk].supplier, book_orders[pk].ordered_on)
    }


def new_orders(job: Job, numbers: Numbers) -> list[SupplyOrder]:
    base = numbers.base.get(ORDERS, 0)
    return [
        SupplyOrder(
            pk=base - order.id, code=code, code_order=natural_key(code), supplier=order.supplier,
            ordered_on=order.ordered_on, entered_by=job.person,
        )
        for code, order in job.known.new_orders.items()
    ]  # fmt: skip


def write_orders(job: Job, numbers: Numbers) -> None:
    """With their history, in the last transaction."""
    for order in new_orders(job, numbers):
        order.save(force_insert=True)
    for order in SupplyOrder.objects.filter(pk__in=job.changed_orders):
        order.supplier, order.ordered_on = job.changed_orders[order.pk]
        order.version += 1
        order.save()


def drop_unused(job: Job) -> None:
    """Orders all of whose lines were wrong are not made."""
    used = {order for (order,) in fetch("SELECT DISTINCT order_id FROM stage_supply WHERE order_id < 0")}
    job.known.new_orders = {code: order for code, order in job.known.new_orders.items() if order.id in used}
