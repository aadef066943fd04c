-- Sunday night at Ostrel Creameries: every series is fitted, and the fits are kept.
--
--     stillwell run parquet-samples/sunday_fits.sql
--     stillwell run parquet-samples/monday_outlook.sql
--
-- A fit is a value: a struct that holds the structure, its parameters and where the series stands. It goes to Parquet like
-- any other column, and the job of Monday needs nothing else of the past.

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

-- It is Sunday, 14 December 2025: what was sold later is not known yet, but prices and promotions are planned. Rows
-- whose units are NULL carry that plan, and the fit keeps it.
CREATE VIEW known AS
SELECT region, product, week, CASE WHEN week < DATE '2025-12-15' THEN units END AS units,
       ln(price) AS price, promo, holiday
FROM sales;

-- The folder is replaced whole on every run.
COPY (
    SELECT region, product,
           structural_fit(week, units,
               {'trend': 'local linear', 'season': 52.18, 'harmonics': 3, 'transform': 'log'},
               {'price': price, 'promo': promo, 'holiday': holiday}) AS fit
    FROM known
    GROUP BY region, product
) TO 'nightly/sunday/' STORED AS PARQUET PARTITIONED BY (region);
