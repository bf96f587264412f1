"""Apache Spark: data that one machine cannot hold, counted and summed where they lie.

``place`` reads where the data are from the plan, ``session`` starts Spark or joins a cluster that the environment
names, ``opening`` gives the rows as one table that the reduction to covariate patterns works on, ``sums`` adds up
numbers over the rows inside the executors, and ``faults`` turns what Spark says into one clear line.

Nothing in here loads pyspark before data are opened.
"""

from adjustplan.data.spark.opening import open_spark
from adjustplan.data.spark.place import is_spark
from adjustplan.data.spark.sums import each_partition, frame_of, sum_over_rows

__all__ = ["each_partition", "frame_of", "is_spark", "open_spark", "sum_over_rows"]
