//! Published worked examples of T2, its limits and the SPE, each with its source.

use perpend::RowStore;
use perpend::watch::lens::Lens;
use perpend::watch::limits::quantile;

/// Judges deviations by given axes and energies; a channel of zeros is added so that there is always a residual.
fn judge(axes: &[&[f64]], energies: &[f64], deviation: &[f64]) -> (f64, f64) {
    let channels = deviation.len() + 1;
    let mut store = RowStore::<f64>::zeros(axes.len(), channels);
    for (index, axis) in axes.iter().enumerate() {
        store.row_mut(index)[..axis.len()].copy_from_slice(axis);
    }
    let mut lens = Lens::<f64>::new(channels, axes.len());
    lens.take(store.view(axes.len()), energies, channels, 1e-30);
    lens.deviation[..deviation.len()].copy_from_slice(deviation);
    let judged = lens.judge(channels).unwrap();
    (judged.spe, judged.t2)
}

/// NIST/SEMATECH e-Handbook of Statistical Methods, 6.5.5.2, numerical example: ten rows of three channels. Printed:
/// eigenvalues 1.7688, 0.9271, 0.3041 of the correlation matrix, the eigenvectors below, and for row 1 a T2 of 0.5828 on
/// three components and a Q of 0.0011 off two.
#[test]
fn t2_and_spe_of_the_nist_principal_component_example() {
    let mean = [6.9, 3.5, 5.1];
    let spread = [1.523_884, 1.581_139, 2.806_738];
    let row = [7.0, 4.0, 3.0];
    let z: Vec<f64> = (0..3).map(|c| (row[c] - mean[c]) / spread[c]).collect();
    let axes: [&[f64]; 3] =
        [&[0.642, 0.6864, -0.3417], &[0.3847, 0.0971, 0.9179], &[-0.6632, 0.7207, 0.2017]];
    let energies = [1.7688, 0.9271, 0.3041];
    let (_, t2) = judge(&axes, &energies, &z);
    // Four printed digits in the axes, as many in the answer.
    assert!((t2 - 0.5828).abs() < 2e-4, "{t2}");
    let (spe, t2) = judge(&axes[..2], &energies[..2], &z);
    assert!((spe - 0.0011).abs() < 1e-4, "{spe}");
    // On two components, computed in full precision: 0.57910.
    assert!((t2 - 0.579_10).abs() < 2e-4, "{t2}");
}

/// Jackson, J. Quality Technology 12 (1980) 201-213, chemical example, covariance (.7986 .6793 .7343) and roots 1.4465,
/// .0864 as printed in Jackson (1991), chapter 1; the T2 of the first and last rows computed from the printed data.
#[test]
fn t2_of_the_chemical_example_of_jackson() {
    let axes: [&[f64]; 2] = [
        &[0.723_624_808_304_447_6, 0.690_193_550_249_748],
        &[-0.690_193_550_249_748, 0.723_624_808_304_447_6],
    ];
    let energies = [1.446_474_338_195_749_4, 0.086_382_804_661_393_34];
    for (row, expected) in [([0.0, 0.7], 3.131_639_873_745_932), ([-1.5, -0.8], 4.265_231_540_650_788)] {
        let (spe, t2) = judge(&axes, &energies, &row);
        assert!((t2 / expected - 1.0).abs() < 1e-13, "{t2}");
        assert!(spe < 1e-30);
    }
}

/// Montgomery, Introduction to Statistical Quality Control, example 11.1 (20 samples of 10, 2 variables): the printed
/// phase I limit is (342/179) F = 13.72; exercise 11-2 (30 samples of 10, 3 variables): (837/268) F = 17.4251.
#[test]
fn control_limits_of_the_examples_of_montgomery() {
    assert!((342.0 / 179.0 * quantile::fisher(2.0, 179.0, 1e-3) - 13.72).abs() < 0.005);
    assert!((837.0 / 268.0 * quantile::fisher(3.0, 268.0, 1e-3) - 17.4251).abs() < 5e-5);
    // Printed beside them: chi-square instead of F, 13.816.
    assert!((quantile::chi_square(2.0, 1e-3) - 13.816).abs() < 5e-4);
}
