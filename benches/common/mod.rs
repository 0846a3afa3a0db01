//! What the benchmarks of measuring share: the work itself, and the plain transform that it is compared with.

use gaptone::measure::{Measurer, Options};

/// Samples of a block, of the transform and of what is pushed.
pub const BLOCK: usize = 4096;

/// Measures samples; the number of events, so that nothing is optimised away.
pub fn measure(samples: &[f32], sample_rate_hz: u32) -> usize {
    let mut measurer = Measurer::new(sample_rate_hz, Options::default());
    samples.chunks(BLOCK).for_each(|block| measurer.push(block));
    measurer.finish().events.len()
}

/// One pass of plain real transforms over the samples, block by block.
pub fn transform(samples: &[f32]) -> f32 {
    let plan = realfft::RealFftPlanner::<f32>::new().plan_fft_forward(BLOCK);
    let (mut input, mut output) = (plan.make_input_vec(), plan.make_output_vec());
    let mut sum = 0.0;
    for block in samples.chunks_exact(BLOCK) {
        input.copy_from_slice(block);
        plan.process(&mut input, &mut output).expect("lengths fit");
        sum += output[1].re;
    }
    sum
}
