-- The functions that questions may use, for PostgreSQL; on SQLite the program defines the same ones.
-- cone_stretches and healpix exist on SQLite only.

CREATE OR REPLACE FUNCTION separation_arcsec(ra1_deg float8, dec1_deg float8, ra2_deg float8, dec2_deg float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$
    SELECT degrees(atan2(
        sqrt(
            power(cos(radians(dec2_deg)) * sin(radians(ra2_deg - ra1_deg)), 2)
            + power(
                cos(radians(dec1_deg)) * sin(radians(dec2_deg))
                - sin(radians(dec1_deg)) * cos(radians(dec2_deg)) * cos(radians(ra2_deg - ra1_deg)), 2
            )
        ),
        sin(radians(dec1_deg)) * sin(radians(dec2_deg))
        + cos(radians(dec1_deg)) * cos(radians(dec2_deg)) * cos(radians(ra2_deg - ra1_deg))
    )) * 3600.0
$$;

CREATE OR REPLACE FUNCTION in_cone(ra_deg float8, dec_deg float8, ra0_deg float8, dec0_deg float8, radius_arcsec float8)
RETURNS integer LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$
    SELECT CASE WHEN separation_arcsec(ra_deg, dec_deg, ra0_deg, dec0_deg) <= radius_arcsec THEN 1 ELSE 0 END
$$;

-- AB zero: 3631 Jy (Oke & Gunn 1983, ApJ 266, 713)
CREATE OR REPLACE FUNCTION jy_from_ab_mag(mag float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$ SELECT 3631.0::float8 * power(10.0::float8, -0.4::float8 * mag) $$;

CREATE OR REPLACE FUNCTION ab_mag_from_jy(jy float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$
    SELECT CASE WHEN jy > 0 THEN -2.5::float8 * log(jy / 3631.0::float8) END
$$;

CREATE OR REPLACE FUNCTION jy_from_mag(mag float8, zero_point_jy float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$ SELECT zero_point_jy * power(10.0::float8, -0.4::float8 * mag) $$;

-- parsec: IAU 2015 resolution B2
CREATE OR REPLACE FUNCTION luminosity_erg_s(flux_erg_s_cm2 float8, distance_pc float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$
    SELECT 4.0::float8 * pi() * power(distance_pc * 1.495978707e13::float8 * 648000.0::float8 / pi(), 2) * flux_erg_s_cm2
$$;

CREATE OR REPLACE FUNCTION flux_erg_s_cm2(luminosity_erg_s float8, distance_pc float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$
    SELECT CASE WHEN distance_pc <> 0 THEN
        luminosity_erg_s / (4.0::float8 * pi() * power(distance_pc * 1.495978707e13::float8 * 648000.0::float8 / pi(), 2))
    END
$$;

-- Planck constant and electronvolt: exact in the SI (SI Brochure 9, 2019)
CREATE OR REPLACE FUNCTION hz_from_kev(kev float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$ SELECT kev * (1.602176634e-9::float8 / 6.62607015e-27::float8) $$;

CREATE OR REPLACE FUNCTION hz_from_um(um float8)
RETURNS float8 LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE AS $$ SELECT CASE WHEN um <> 0 THEN 2.99792458e14::float8 / um END $$;

CREATE OR REPLACE FUNCTION days_between(earlier text, later text)
RETURNS float8 LANGUAGE sql STABLE STRICT PARALLEL SAFE AS $$
    SELECT (extract(epoch FROM later::timestamptz) - extract(epoch FROM earlier::timestamptz))::float8 / 86400.0
$$;

-- The moment of the question; blankfield sql --as-of sets another one for its session.
CREATE OR REPLACE FUNCTION now_utc()
RETURNS text LANGUAGE sql STABLE PARALLEL SAFE AS $$
    SELECT coalesce(
        nullif(current_setting('blankfield.now', true), ''),
        to_char(now() AT TIME ZONE 'UTC', 'YYYY-MM-DD"T"HH24:MI:SS"Z"')
    )
$$;
