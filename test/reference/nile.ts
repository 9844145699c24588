/**
 * Annual flow of the Nile at Aswan, 1871-1970, 10^8 m³: the worked example of Durbin and Koopman, Time Series Analysis by
 * State Space Methods (2nd ed. 2012), chapter 2; also R's datasets::Nile and statsmodels.datasets.nile (public domain).
 * Written down from memory; a wrong value shows as a filtered level other than the published one.
 */
export const NILE: readonly number[] = [
  1120, 1160, 963, 1210, 1160, 1160, 813, 1230, 1370, 1140, 995, 935, 1110, 994, 1020, 960, 1180, 799, 958, 1140, 1100,
  1210, 1150, 1250, 1260, 1220, 1030, 1100, 774, 840, 874, 694, 940, 833, 701, 916, 692, 1020, 1050, 969, 831, 726, 456,
  824, 702, 1120, 1100, 832, 764, 821, 768, 845, 864, 862, 698, 845, 744, 796, 1040, 759, 781, 865, 845, 944, 984, 897,
  822, 1010, 771, 676, 649, 846, 812, 742, 801, 1040, 860, 874, 848, 890, 744, 749, 838, 1050, 918, 986, 797, 923, 975,
  815, 1020, 906, 901, 1170, 912, 746, 919, 718, 714, 740,
];

/**
 * Local level model at σ²ε = 15099, σ²η = 1469.1 (the book's estimates). Filtered level and variance at 1970, one-step
 * variance: R 4.2.2 (StructTS filtering) and statsmodels 0.13.5 agree to the digits given. Forecast standard errors as
 * statsmodels' get_forecast, by step.
 */
export const NILE_LOCAL_LEVEL = {
  observationVariance: 15099,
  levelVariance: 1469.1,
  filteredLevel: 798.3703,
  filteredVariance: 4032.158,
  predictedVariance: 5501.258,
  forecastErrors: [
    { step: 1, standardError: 143.53 },
    { step: 10, standardError: 183.91 },
    { step: 30, standardError: 251.4 },
  ],
} as const;
