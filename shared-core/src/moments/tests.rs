use super::*;

fn moments(readings: &[i64]) -> Moments {
    let mut moments = Moments::default();
    for reading in readings {
        moments.add(Counts::new(*reading).unwrap()).unwrap();
    }
    moments
}

#[test]
fn mean_and_variance_of_a_few_counts_are_what_they_are_on_paper() {
    let hundredths: Resolution = "0.01".parse().unwrap();
    let moments = moments(&[100, 102, 104, 110]);
    assert_eq!(moments.mean(hundredths), Some(1.04));
    assert_eq!(moments.variance(hundredths), Some(56.0 / 30_000.0));
    assert_eq!(moments.distance_to("1.5".parse().unwrap(), hundredths), Some(0.46));
    assert_eq!(moments.mean_square_about("1.03".parse().unwrap(), hundredths), Some(0.0015));
}
