-- Monday night: the fits of Sunday are advanced over what came in since, and forecast from. Nothing is estimated, and no row
-- before 15 December is read.
--
--     stillwell run parquet-samples/monday_outlook.sql      -- after sunday_fits.sql

CREATE EXTERNAL TABLE sales (
    region  VARCHAR,
    product VARCHAR,
    week    DATE,
    units   DOUBLE,
    price   DOUBLE,
    promo   DOUBLE,
    holiday DOUBLE
)
STORED AS PARQUET
PARTITIONED BY (region)
LOCATION 'parquet-samples/sales/';

CREATE EXTERNAL TABLE sunday STORED AS PARQUET PARTITIONED BY (region) LOCATION 'nightly/sunday/';

-- The new rows of each series as lists: two weeks of sales, and the plan after them, which may have changed since.
CREATE VIEW news AS
SELECT region, product, array_agg(week) AS weeks, array_agg(units) AS units,
       array_agg(ln(price)) AS price, array_agg(promo) AS promo, array_agg(holiday) AS holiday
FROM sales
WHERE week >= DATE '2025-12-15'
GROUP BY region, product;

-- A series without news stays where it is; so does one that had trouble, with its status.
COPY (
    SELECT sunday.region, sunday.product,
           fit_advance(fit, weeks, units, {'price': price, 'promo': promo, 'holiday': holiday}) AS fit
    FROM sunday
    LEFT JOIN news ON news.region = sunday.region AND news.product = sunday.product
) TO 'nightly/monday/' STORED AS PARQUET PARTITIONED BY (region);

CREATE EXTERNAL TABLE monday STORED AS PARQUET PARTITIONED BY (region) LOCATION 'nightly/monday/';

-- What was not taken, and why: a row that came twice, a week that was corrected, a mistyped date. Those fits are what they were on
-- Sunday. An empty answer is the usual one. Read "status" too: it says which series have no fit at all.
SELECT region, product, fit['status'] AS status, fit['refused'] AS refused, fit['message'] AS message
FROM monday
WHERE fit['status'] <> 'ok' OR fit['refused'] IS NOT NULL
ORDER BY region, product;

-- Thirteen weeks under the plan, with the columns of forecast.
COPY (
    SELECT region, product, s['at'] AS at, s['step'] AS step, s['expected'] AS expected,
           s['lower'] AS lower, s['upper'] AS upper, s['total_expected'] AS total_expected,
           s['total_lower'] AS total_lower, s['total_upper'] AS total_upper, s['status'] AS status
    FROM (SELECT region, product, unnest(fit_forecast(fit, 13, 0.9)) AS s FROM monday)
) TO 'nightly/forecast/' STORED AS PARQUET PARTITIONED BY (region);
