/**
 * The units of UCUM that plants use, and what each is made of. Not all of UCUM: no arbitrary units, no logarithmic or
 * other scales without a ratio but the two temperatures, nothing that belongs to a laboratory alone. A library that has
 * them all takes fifty times the memory of this table and was measured against it, see test/protocol/units.
 *
 * source  Unified Code for Units of Measure, tables 1 to 29; every value is held against a library's in
 *         test/protocol/units/units.reference.test.ts. mol and eV are those of the SI of 2019, where older texts of UCUM
 *         have rounded ones: it only shows where one is turned into a bare number.
 */

/** Units that everything else is made of, in the order of a dimension's exponents (UCUM table 2). */
export const BASE_UNITS = ['m', 's', 'g', 'rad', 'K', 'C', 'cd'] as const;

/** Powers of ten that may stand before a metric unit (UCUM table 1). */
export const PREFIX_POWERS: Readonly<Record<string, number>> = {
  ...{ Y: 24, Z: 21, E: 18, P: 15, T: 12, G: 9, M: 6, k: 3, h: 2, da: 1 },
  ...{ d: -1, c: -2, m: -3, u: -6, n: -9, p: -12, f: -15, a: -18, z: -21, y: -24 },
};

/** Units that take a prefix: "value unit" of each. */
export const METRIC_UNITS: Readonly<Record<string, string>> = {
  ...{ sr: '1 rad2', Hz: '1 s-1', N: '1 kg.m/s2', Pa: '1 N/m2', J: '1 N.m', W: '1 J/s', A: '1 C/s', V: '1 J/C' },
  ...{ F: '1 C/V', Ohm: '1 V/A', S: '1 Ohm-1', Wb: '1 V.s', T: '1 Wb/m2', H: '1 Wb/A', lm: '1 cd.sr', lx: '1 lm/m2' },
  ...{ Bq: '1 s-1', Gy: '1 J/kg', Sv: '1 J/kg', mol: '6.02214076 10*23', kat: '1 mol/s', eq: '1 mol', osm: '1 mol' },
  ...{ l: '1 dm3', L: '1 l', ar: '100 m2', t: '1000 kg', bar: '100000 Pa', dyn: '1 g.cm/s2', erg: '1 dyn.cm' },
  ...{ P: '1 dyn.s/cm2', St: '1 cm2/s', G: '0.0001 T', gf: '1 g.[g]', eV: '1.602176634 10*-19.J' },
  ...{ cal: '4.184 J', cal_IT: '4.1868 J', cal_th: '4.184 J', 'm[H2O]': '9.80665 kPa', 'm[Hg]': '133.322 kPa' },
  ...{ bit: '1 1', By: '8 bit', Ci: '37000000000 Bq', '[g]': '9.80665 m/s2', st: '1 m3' },
};

/** Units that take none. */
export const OTHER_UNITS: Readonly<Record<string, string>> = {
  ...{ '%': '1 10*-2', '[ppth]': '1 10*-3', '[ppm]': '1 10*-6', '[ppb]': '1 10*-9', '[pptr]': '1 10*-12' },
  ...{ '[pi]': '3.1415926535897932384626433832795 1', min: '60 s', h: '60 min', d: '24 h', wk: '7 d', a: '365.25 d' },
  ...{ a_j: '365.25 d', a_g: '365.2425 d', mo: '30.4375 d', mo_j: '30.4375 d', deg: '2 [pi].rad/360', gon: '0.9 deg' },
  ...{ "'": '1 deg/60', "''": "1 '/60", '[in_i]': '2.54 cm', '[ft_i]': '12 [in_i]', '[yd_i]': '3 [ft_i]' },
  ...{ '[mi_i]': '5280 [ft_i]', '[nmi_i]': '1852 m', '[kn_i]': '1 [nmi_i]/h', '[mil_i]': '0.001 [in_i]' },
  ...{ '[sin_i]': '1 [in_i]2', '[sft_i]': '1 [ft_i]2', '[syd_i]': '1 [yd_i]2', '[cin_i]': '1 [in_i]3' },
  ...{ '[cft_i]': '1 [ft_i]3', '[cyd_i]': '1 [yd_i]3', '[gal_us]': '231 [in_i]3', '[bbl_us]': '42 [gal_us]' },
  ...{ '[qt_us]': '1 [gal_us]/4', '[pt_us]': '1 [qt_us]/2', '[foz_us]': '1 [pt_us]/16', '[gal_br]': '4.54609 l' },
  ...{ '[gr]': '64.79891 mg', '[lb_av]': '7000 [gr]', '[oz_av]': '1 [lb_av]/16', '[scwt_av]': '100 [lb_av]' },
  ...{ '[ston_av]': '20 [scwt_av]', '[lcwt_av]': '112 [lb_av]', '[lton_av]': '20 [lcwt_av]' },
  ...{ '[lbf_av]': '1 [lb_av].[g]', '[psi]': '1 [lbf_av]/[in_i]2', atm: '101325 Pa', att: '1 kgf/cm2' },
  ...{ "[in_i'H2O]": '1 m[H2O].[in_i]/m', "[in_i'Hg]": '1 m[Hg].[in_i]/m', '[degR]': '5 K/9' },
  ...{ '[Btu_IT]': '1.05505585262 kJ', '[Btu_th]': '1.05435 kJ', '[Btu]': '1 [Btu_th]' },
  ...{ '[HP]': '550 [ft_i].[lbf_av]/s', '10*': '10 1', '10^': '10 1' },
};

/** Scales that begin elsewhere than at nothing: kelvin = (value + from) × unit. They stand alone, without a prefix. */
export const TEMPERATURES: Readonly<Record<string, { readonly from: number; readonly unit: string }>> = {
  Cel: { from: 273.15, unit: 'K' },
  '[degF]': { from: 459.67, unit: '[degR]' },
};
