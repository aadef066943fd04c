-- The weekly outlook of Ostrel Creameries: where every product stands in every region, what the next thirteen
-- weeks bring under the price plan, and which series deserve a look.
--
--     stillwell run parquet-samples/weekly_outlook.sql
--
-- It reads four years of weekly sales and writes three folders of Parquet beside where you start it:
-- outlook/components, outlook/forecast and outlook/diagnostics, one partition per region.

-- What was sold. One row per region, product and week; units are NULL where a count is missing, and in the
-- last thirteen weeks, which carry the plan: prices and promotions are set, sales are still to come.
CREATE EXTERNAL TABLE sales (
    region  VARCHAR,
    product VARCHAR,
    week    DATE,
    units   DOUBLE,
    price   DOUBLE,      -- crowns, as paid
    promo   DOUBLE,      -- 1 in a week of promotion, else 0
    holiday DOUBLE       -- 1 in a week that holds a public holiday, else 0
)
STORED AS PARQUET
PARTITIONED BY (region)
LOCATION 'parquet-samples/sales/';

-- Price enters as its distance from the product's own average, so that "level" reads as the sales of an
-- ordinary week at the usual price: no promotion, no holiday, no season.
CREATE VIEW weekly AS
SELECT region, product, week, units, promo, holiday,
       price - avg(price) OVER (PARTITION BY region, product) AS price
FROM sales;

-- Where each series really stands, week by week.
--
-- On the log scale a promotion, a holiday or the season adds so many per cent, whatever the size of the
-- product: effect_of_promo = 1.30 means 30 % more than without, slope = 0.002 means growth of 0.2 % a week.
-- A year is 52.18 weeks; three harmonics draw a smooth yearly pattern that may drift a little. The plant
-- outage in Marrowdale shows as a dip of the level, and shift_t says how unlikely such a dip is by chance.
COPY (
    SELECT * FROM components(
        data      => (SELECT * FROM weekly),
        per       => (region, product),
        at        => week,
        observed  => units,
        drivers   => (price, promo, holiday),
        trend     => 'local linear',
        season    => 52.18,
        harmonics => 3,
        transform => 'log')
) TO 'outlook/components/' STORED AS PARQUET PARTITIONED BY (region);

-- The next thirteen weeks under the plan.
--
-- lower and upper are meant to hold the week's sales nine times in ten; total_expected, total_lower and
-- total_upper do the same for everything from the first week to this one, which is what to order for a lead time
-- (adding up the weekly limits would order far too much). A series without a plan for the thirteen weeks,
-- such as the withdrawn Larch Whey, comes back with a status instead of numbers; so does Hollow Blue in
-- Saltmarsh, which never sold. Neither keeps the others from being forecast.
COPY (
    SELECT * FROM forecast(
        data      => (SELECT * FROM weekly),
        per       => (region, product),
        at        => week,
        observed  => units,
        drivers   => (price, promo, holiday),
        trend     => 'local linear',
        season    => 52.18,
        harmonics => 3,
        transform => 'log',
        horizon   => 13,
        coverage  => 0.9)
) TO 'outlook/forecast/' STORED AS PARQUET PARTITIONED BY (region);

-- One row per series: what was fitted, how well it describes the series, and in plain words what is wrong
-- with those that have trouble. Read "status" and "message" first.
COPY (
    SELECT * FROM diagnostics(
        data      => (SELECT * FROM weekly),
        per       => (region, product),
        at        => week,
        observed  => units,
        drivers   => (price, promo, holiday),
        trend     => 'local linear',
        season    => 52.18,
        harmonics => 3,
        transform => 'log')
) TO 'outlook/diagnostics/' STORED AS PARQUET PARTITIONED BY (region);
