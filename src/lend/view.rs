//! One lent array: how its numbers lie in the host's memory, checked, and read block by block.

use super::convert;
use super::memory::{every, gather, packed, pick};
use std::fmt;

/// The type of the host's numbers.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Scalar {
    /// IEEE 754 binary32.
    F32,
    /// IEEE 754 binary64.
    F64,
    /// Signed 32-bit integer.
    I32,
    /// Unsigned 32-bit integer.
    U32,
    /// Signed 64-bit integer.
    I64,
    /// Unsigned 64-bit integer.
    U64,
}

impl Scalar {
    /// Bytes of one number; also its alignment.
    pub fn bytes(self) -> usize {
        match self {
            Scalar::F32 | Scalar::I32 | Scalar::U32 => 4,
            Scalar::F64 | Scalar::I64 | Scalar::U64 => 8,
        }
    }

    /// Is it an integer type?
    pub fn is_integer(self) -> bool {
        !matches!(self, Scalar::F32 | Scalar::F64)
    }
}

/// How the elements of an array follow each other; the same from step to step while pointers change.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct ArrayShape {
    /// Type of the numbers.
    pub scalar: Scalar,
    /// Numbers an element has.
    pub components: usize,
    /// Bytes from an element to the next; 0: one value for all.
    pub stride: isize,
    /// Bytes from a component to the next; unused where components are arrays of their own.
    pub component_stride: isize,
}

/// Counts beyond this are taken for a mistake: no process holds so many elements, and going through them, even
/// if they are all one value, would never end.
const MOST_ELEMENTS: usize = 1 << 40;
/// No address of a process is beyond it.
const LAST_ADDRESS: usize = 1 << 56;
/// Strides beyond this are taken for a mistake: no host has elements of a megabyte.
const LARGEST_STRIDE: isize = 1 << 20;

/// A lent array, checked.
///
/// # What is trusted
/// That `count` elements as described stay readable and unchanged until the view is let go. Nothing in the
/// arguments can show that it is so; it is the host's duty, stated in the header.
#[derive(Clone, Debug)]
pub struct View {
    shape: ArrayShape,
    count: usize,
    /// Address of the first element's number, for each component. Kept as addresses: a view is only turned
    /// into a pointer where it is read.
    bases: Bases,
}

#[derive(Clone, Debug)]
enum Bases {
    /// Components follow the first at the component stride.
    Interleaved(usize),
    /// Up to three arrays of their own, without a heap.
    Three([usize; 3]),
    /// Any number of arrays of their own.
    Many(Vec<usize>),
}

/// Where the host says its numbers are.
#[derive(Clone, Copy, Debug)]
pub enum Lent<'a> {
    /// One address; components follow at the component stride.
    Interleaved(usize),
    /// One address a component.
    Arrays(&'a [usize]),
}

/// What is wrong with a description, in words that complete "gas velocity: …".
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ViewError(pub String);

impl fmt::Display for ViewError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

fn wrong<T>(message: String) -> Result<T, ViewError> {
    Err(ViewError(message))
}

impl ArrayShape {
    /// Checks all that can be checked without an address.
    ///
    /// # Errors
    /// A stride that is not a multiple of the number's size, that lets elements overlap, or that is absurd.
    pub fn check(&self, separate_arrays: bool) -> Result<(), ViewError> {
        let size = self.scalar.bytes() as isize;
        let spans = if separate_arrays || self.components == 1 {
            size
        } else {
            let step = self.component_stride;
            if step % size != 0 || step == 0 || step.unsigned_abs() > LAST_ADDRESS {
                return wrong(format!(
                    "a component stride of {step} bytes cannot hold {size}-byte numbers; give a multiple of {size}, \
                     for packed components {size}"
                ));
            }
            size
        };
        let stride = self.stride;
        if stride % size != 0 {
            return wrong(format!(
                "a stride of {stride} bytes is not a multiple of the {size} bytes of one number; \
                 give sizeof the element (0 for one value shared by all)"
            ));
        }
        if stride.unsigned_abs() > LARGEST_STRIDE.unsigned_abs() {
            return wrong(format!(
                "a stride of {stride} bytes is more than {LARGEST_STRIDE}; strides are in bytes from one element \
                 to the next"
            ));
        }
        if stride != 0 && stride.abs() < spans {
            return wrong(format!(
                "a stride of {stride} bytes lets elements of {spans} bytes overlap"
            ));
        }
        let interleaved = !separate_arrays && self.components > 1;
        if interleaved && stride != 0 {
            let last = self
                .component_stride
                .abs()
                .checked_mul(self.components as isize - 1);
            let packed_element = last.is_some_and(|last| last.saturating_add(size) <= stride.abs());
            // Components may also be planes of one array: then elements follow closely and planes are far apart.
            let planes = self.component_stride.abs() > stride.abs();
            if !packed_element && !planes {
                return wrong(format!(
                    "a stride of {stride} bytes is shorter than {} components at {} bytes each; give the bytes from \
                     one element's first component to the next element's",
                    self.components, self.component_stride
                ));
            }
        }
        Ok(())
    }
}

impl View {
    /// Checks a description and makes a view of it.
    ///
    /// # Errors
    /// A null or misaligned address, a shape that [`ArrayShape::check`] refuses, or a range that leaves the
    /// address space.
    pub fn new(shape: ArrayShape, count: usize, lent: Lent) -> Result<View, ViewError> {
        shape.check(matches!(lent, Lent::Arrays(_)))?;
        if count > MOST_ELEMENTS {
            return wrong(format!(
                "{count} elements exceed the address space of any process; is the count a negative number?"
            ));
        }
        let bases = match lent {
            Lent::Interleaved(address) => {
                check_range(shape, count, address, shape.components)?;
                check_planes(shape, count)?;
                Bases::Interleaved(address)
            }
            Lent::Arrays(addresses) => {
                if addresses.len() != shape.components {
                    return wrong(format!(
                        "{} arrays are given where {} components are expected",
                        addresses.len(),
                        shape.components
                    ));
                }
                for &address in addresses {
                    check_range(shape, count, address, 1)?;
                }
                match *addresses {
                    [x, y, z] => Bases::Three([x, y, z]),
                    _ => Bases::Many(addresses.to_vec()),
                }
            }
        };
        Ok(View {
            shape,
            count,
            bases,
        })
    }

    /// Number of elements.
    pub fn count(&self) -> usize {
        self.count
    }

    /// Numbers an element has.
    pub fn components(&self) -> usize {
        self.shape.components
    }

    /// Type of the numbers.
    pub fn scalar(&self) -> Scalar {
        self.shape.scalar
    }

    fn base(&self, component: usize) -> usize {
        match &self.bases {
            Bases::Interleaved(address) => address
                .wrapping_add_signed(self.shape.component_stride.wrapping_mul(component as isize)),
            Bases::Three(addresses) => addresses[component],
            Bases::Many(addresses) => addresses[component],
        }
    }

    /// Reads `into.len()` numbers of one component, from element `start` on, as doubles. Returns whether all are
    /// finite.
    ///
    /// # Panics
    /// When the range is outside the view: a mistake of ours, not of a host.
    pub fn read(&self, component: usize, start: usize, into: &mut [f64]) -> bool {
        self.check_block(component, start, into.len());
        let base = self.base(component);
        let stride = self.shape.stride;
        match self.shape.scalar {
            Scalar::F32 => match packed::<f32>(base, stride, start, into.len()) {
                Some(numbers) => return convert::singles(numbers, into),
                None => gather::<f32, f64>(base, stride, start, into, f64::from),
            },
            Scalar::F64 => match packed::<f64>(base, stride, start, into.len()) {
                Some(numbers) => return convert::doubles(numbers, into),
                None => gather::<f64, f64>(base, stride, start, into, |x| x),
            },
            Scalar::I32 => gather::<i32, f64>(base, stride, start, into, f64::from),
            Scalar::U32 => gather::<u32, f64>(base, stride, start, into, f64::from),
            Scalar::I64 => gather::<i64, f64>(base, stride, start, into, |x| x as f64),
            Scalar::U64 => gather::<u64, f64>(base, stride, start, into, |x| x as f64),
        }
        self.shape.scalar.is_integer() || convert::are_finite(into)
    }

    /// Reads all three components of vectors, from element `start` on, as doubles. Returns whether all are finite.
    ///
    /// # Panics
    /// As [`View::read`].
    pub fn read_vectors(&self, start: usize, [x, y, z]: [&mut [f64]; 3]) -> bool {
        let size = self.shape.scalar.bytes() as isize;
        let triples = matches!(self.bases, Bases::Interleaved(_))
            && self.shape.component_stride == size
            && self.shape.stride == 3 * size;
        if triples {
            self.check_block(2, start, x.len());
            let base = self.base(0);
            // Numbers of a row of vectors follow each other like those of one array three times as long.
            match self.shape.scalar {
                Scalar::F32 => {
                    if let Some(numbers) = packed::<f32>(base, size, 3 * start, 3 * x.len()) {
                        return convert::single_triples(numbers, x, y, z);
                    }
                }
                Scalar::F64 => {
                    if let Some(numbers) = packed::<f64>(base, size, 3 * start, 3 * x.len()) {
                        return convert::double_triples(numbers, x, y, z);
                    }
                }
                _ => {}
            }
        }
        self.read(0, start, x) & self.read(1, start, y) & self.read(2, start, z)
    }

    /// Reads one component of some elements, numbered from `start` on, as doubles.
    ///
    /// # Panics
    /// When an element is outside the view, or the lengths differ: a mistake of ours, not of a host.
    pub fn read_some(&self, component: usize, start: usize, elements: &[u32], into: &mut [f64]) {
        assert!(component < self.shape.components && elements.len() == into.len());
        let within = self.count.saturating_sub(start);
        let base = self.base(component);
        let stride = self.shape.stride;
        match self.shape.scalar {
            Scalar::F32 => pick::<f32>(base, stride, start, within, elements, into, f64::from),
            Scalar::F64 => pick::<f64>(base, stride, start, within, elements, into, |x| x),
            Scalar::I32 => pick::<i32>(base, stride, start, within, elements, into, f64::from),
            Scalar::U32 => pick::<u32>(base, stride, start, within, elements, into, f64::from),
            Scalar::I64 => pick::<i64>(base, stride, start, within, elements, into, |x| x as f64),
            Scalar::U64 => pick::<u64>(base, stride, start, within, elements, into, |x| x as f64),
        }
    }

    /// Reads all three components of some vectors, numbered from `start` on, as doubles.
    ///
    /// # Panics
    /// As [`View::read_some`].
    pub fn read_some_vectors(&self, start: usize, elements: &[u32], runs: [&mut [f64]; 3]) {
        let size = self.shape.scalar.bytes() as isize;
        let within = self.count.saturating_sub(start);
        let is_row = matches!(self.bases, Bases::Interleaved(_))
            && self.shape.component_stride == size
            && self.shape.stride == 3 * size;
        if is_row
            && self.shape.scalar == Scalar::F32
            && let Some(numbers) = packed::<f32>(self.base(0), size, 3 * start, 3 * within)
        {
            return convert::some_single_triples(numbers, elements, runs);
        }
        for (component, run) in runs.into_iter().enumerate() {
            self.read_some(component, start, elements, run);
        }
    }

    /// Reads all three components of vectors, from element `start` on, rounded to singles. Returns the largest
    /// magnitude among them; none when a number is not finite, or too large for a single.
    ///
    /// # Panics
    /// As [`View::read`].
    pub fn read_roughly(&self, start: usize, runs: [&mut [f32]; 3]) -> Option<f32> {
        let length = runs[0].len();
        self.check_block(2, start, length);
        let size = self.shape.scalar.bytes() as isize;
        let stride = self.shape.stride;
        let triples = matches!(self.bases, Bases::Interleaved(_))
            && self.shape.component_stride == size
            && stride == 3 * size;
        let [x, y, z] = runs;
        let base = self.base(0);
        let largest = match self.shape.scalar {
            Scalar::F32
                if triples && let Some(numbers) = packed(base, size, 3 * start, 3 * length) =>
            {
                convert::rough_single_triples(numbers, x, y, z)
            }
            Scalar::F64
                if triples && let Some(numbers) = packed(base, size, 3 * start, 3 * length) =>
            {
                convert::rough_double_triples(numbers, x, y, z)
            }
            _ => [x, y, z]
                .into_iter()
                .enumerate()
                .map(|(component, run)| self.read_component_roughly(component, start, run))
                .max()
                .unwrap_or(0),
        };
        let largest = f32::from_bits(largest);
        largest.is_finite().then_some(largest)
    }

    fn read_component_roughly(&self, component: usize, start: usize, into: &mut [f32]) -> u32 {
        let base = self.base(component);
        let stride = self.shape.stride;
        match self.shape.scalar {
            Scalar::F32 => match packed::<f32>(base, stride, start, into.len()) {
                Some(numbers) => return convert::rough_singles(numbers, into),
                None => gather::<f32, f32>(base, stride, start, into, |x| x),
            },
            Scalar::F64 => match packed::<f64>(base, stride, start, into.len()) {
                Some(numbers) => return convert::rough_doubles(numbers, into),
                None => gather::<f64, f32>(base, stride, start, into, |x| x as f32),
            },
            Scalar::I32 => gather::<i32, f32>(base, stride, start, into, |x| x as f32),
            Scalar::U32 => gather::<u32, f32>(base, stride, start, into, |x| x as f32),
            Scalar::I64 => gather::<i64, f32>(base, stride, start, into, |x| x as f32),
            Scalar::U64 => gather::<u64, f32>(base, stride, start, into, |x| x as f32),
        }
        let bits = |number: &f32| number.to_bits() & !(1 << 31);
        into.iter().map(bits).max().unwrap_or(0)
    }

    /// Are all numbers of these elements finite?
    ///
    /// # Panics
    /// As [`View::read`].
    pub fn is_finite(&self, start: usize, length: usize) -> bool {
        let components = self.shape.components;
        self.check_block(components - 1, start, length);
        let size = self.shape.scalar.bytes() as isize;
        // Elements that follow each other without a gap are one long row of numbers.
        let is_row = matches!(self.bases, Bases::Interleaved(_))
            && self.shape.component_stride == size
            && self.shape.stride == components as isize * size;
        let (rows, numbers) = if is_row {
            (1, components)
        } else {
            (components, 1)
        };
        let stride = self.shape.stride / numbers as isize;
        (0..rows).all(|row| {
            let base = self.base(row);
            let (start, length) = (start * numbers, length * numbers);
            match self.shape.scalar {
                Scalar::F32 => match packed::<f32>(base, stride, start, length) {
                    Some(values) => convert::are_finite_singles(values),
                    None => every::<f32>(base, stride, start, length, |x| x.is_finite()),
                },
                Scalar::F64 => match packed::<f64>(base, stride, start, length) {
                    Some(values) => convert::are_finite(values),
                    None => every::<f64>(base, stride, start, length, |x| x.is_finite()),
                },
                _ => true,
            }
        })
    }

    /// Visits the stretches of memory in which elements lie: first and last address, and the bytes from one element
    /// to the next.
    pub(super) fn each_stretch(
        &self,
        start: usize,
        length: usize,
        mut visit: impl FnMut(usize, usize, usize),
    ) {
        let stride = self.shape.stride;
        if length == 0 || stride == 0 {
            return;
        }
        let apart = matches!(self.bases, Bases::Three(_) | Bases::Many(_))
            || self.shape.component_stride.unsigned_abs() > stride.unsigned_abs();
        let runs = if apart { self.shape.components } else { 1 };
        for run in 0..runs {
            let first = self
                .base(run)
                .wrapping_add_signed(stride.wrapping_mul(start as isize));
            let last = first.wrapping_add_signed(stride.wrapping_mul(length as isize - 1));
            visit(first.min(last), first.max(last), stride.unsigned_abs());
        }
    }

    /// Reads identities as 64-bit patterns (32-bit ones are extended; negative ones keep their two's
    /// complement).
    ///
    /// # Panics
    /// As [`View::read`]; also for floating-point numbers, which are refused when lent.
    pub fn read_identities(&self, start: usize, into: &mut [u64]) {
        self.check_block(0, start, into.len());
        let base = self.base(0);
        let stride = self.shape.stride;
        match self.shape.scalar {
            Scalar::I32 => gather::<i32, u64>(base, stride, start, into, |x| i64::from(x) as u64),
            Scalar::U32 => gather::<u32, u64>(base, stride, start, into, u64::from),
            Scalar::I64 => gather::<i64, u64>(base, stride, start, into, |x| x as u64),
            Scalar::U64 => gather::<u64, u64>(base, stride, start, into, |x| x),
            Scalar::F32 | Scalar::F64 => {
                unreachable!("identities of floating-point type are refused when lent")
            }
        }
    }

    fn check_block(&self, component: usize, start: usize, length: usize) {
        assert!(
            component < self.shape.components
                && start
                    .checked_add(length)
                    .is_some_and(|end| end <= self.count)
        );
    }
}

/// Do planes of one array, if that is what the components are, keep clear of each other?
fn check_planes(shape: ArrayShape, count: usize) -> Result<(), ViewError> {
    let (step, stride) = (
        shape.component_stride.unsigned_abs(),
        shape.stride.unsigned_abs(),
    );
    if shape.components == 1 || stride == 0 || step <= stride {
        return Ok(());
    }
    // `check_range` has found this to stay within the address space.
    let plane = count.saturating_sub(1) * stride + shape.scalar.bytes();
    if count > 1 && plane > step {
        return wrong(format!(
            "{count} elements at a stride of {stride} bytes make planes of {plane} bytes that overlap, as they are only \
             {step} bytes apart"
        ));
    }
    Ok(())
}

/// Is the memory from the first to the last number a proper, aligned range?
fn check_range(
    shape: ArrayShape,
    count: usize,
    address: usize,
    components: usize,
) -> Result<(), ViewError> {
    if count == 0 {
        return Ok(());
    }
    let size = shape.scalar.bytes();
    if address == 0 {
        return wrong(format!(
            "the pointer is null, though {count} elements are lent"
        ));
    }
    if !address.is_multiple_of(size) {
        return wrong(format!(
            "the address {address:#x} is not aligned to the {size} bytes of one number; packed structs cannot be \
             lent, nor can a pointer of another type"
        ));
    }
    let elements = isize::try_from(count - 1)
        .ok()
        .and_then(|last| shape.stride.checked_mul(last));
    let parts = shape.component_stride.checked_mul(components as isize - 1);
    let (Some(elements), Some(parts)) = (elements, if components > 1 { parts } else { Some(0) })
    else {
        return wrong(format!(
            "{count} elements at a stride of {} bytes exceed the address space",
            shape.stride
        ));
    };
    let reach = |offset: isize| {
        address
            .checked_add_signed(offset)
            .filter(|&end| end > 0 && end < LAST_ADDRESS)
    };
    let corners = [
        Some(0),
        Some(elements),
        Some(parts),
        elements.checked_add(parts),
    ];
    if corners
        .iter()
        .any(|&offset| offset.and_then(reach).is_none())
    {
        return wrong(format!(
            "{count} elements at a stride of {} bytes from {address:#x} exceed the address space",
            shape.stride
        ));
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn packed(scalar: Scalar, components: usize) -> ArrayShape {
        let size = scalar.bytes() as isize;
        ArrayShape {
            scalar,
            components,
            stride: size * components as isize,
            component_stride: size,
        }
    }

    #[test]
    fn every_layout_reads_the_same_numbers() {
        let interleaved: Vec<f32> = (0..30u8).map(f32::from).collect();
        let arrays: Vec<Vec<f32>> = (0..3)
            .map(|c| interleaved.iter().skip(c).step_by(3).copied().collect())
            .collect();
        let planes: Vec<f32> = arrays.concat();
        let addresses: Vec<usize> = arrays.iter().map(|array| array.as_ptr() as usize).collect();
        let one = |shape, lent| View::new(shape, 10, lent).unwrap();
        let shape = packed(Scalar::F32, 3);
        let views = [
            one(shape, Lent::Interleaved(interleaved.as_ptr() as usize)),
            one(ArrayShape { stride: 4, ..shape }, Lent::Arrays(&addresses)),
            one(
                ArrayShape {
                    stride: 4,
                    component_stride: 40,
                    ..shape
                },
                Lent::Interleaved(planes.as_ptr() as usize),
            ),
        ];
        for view in &views {
            for component in 0..3 {
                let mut read = [0.0; 7];
                view.read(component, 2, &mut read);
                let expected: Vec<f64> = (2..9).map(|i| (3 * i + component) as f64).collect();
                assert_eq!(read.as_slice(), expected);
            }
        }
        let backwards = ArrayShape {
            stride: -12,
            ..shape
        };
        let last = &raw const interleaved[27] as usize;
        let mut read = [0.0; 10];
        one(backwards, Lent::Interleaved(last)).read(1, 0, &mut read);
        assert_eq!(
            read,
            [28.0, 25.0, 22.0, 19.0, 16.0, 13.0, 10.0, 7.0, 4.0, 1.0]
        );
    }

    #[test]
    fn a_stride_of_zero_is_one_value_for_all() {
        let mass = 2.5f64;
        let shape = ArrayShape {
            stride: 0,
            ..packed(Scalar::F64, 1)
        };
        let view = View::new(shape, 1 << 40, Lent::Interleaved(&raw const mass as usize)).unwrap();
        let mut read = [0.0; 4];
        view.read(0, 1 << 39, &mut read);
        assert_eq!(read, [2.5; 4]);
    }

    #[test]
    fn wrong_descriptions_are_refused_with_the_reason() {
        let numbers = [0.0f64; 8];
        let at = numbers.as_ptr() as usize;
        let shape = packed(Scalar::F64, 1);
        let refused = |shape: ArrayShape, count, at| {
            View::new(shape, count, Lent::Interleaved(at))
                .unwrap_err()
                .0
        };
        assert!(refused(shape, 8, 0).contains("null"));
        assert!(refused(shape, 8, at + 4).contains("aligned"));
        assert!(
            refused(
                ArrayShape {
                    stride: 12,
                    ..shape
                },
                2,
                at
            )
            .contains("multiple")
        );
        assert!(
            refused(
                ArrayShape {
                    stride: 1 << 40,
                    ..shape
                },
                2,
                at
            )
            .contains("more than")
        );
        assert!(refused(shape, usize::MAX, at).contains("address space"));
        assert!(refused(shape, usize::MAX / 8, at).contains("address space"));
        assert!(
            refused(
                ArrayShape {
                    stride: -8,
                    ..shape
                },
                at / 8 + 2,
                at
            )
            .contains("address space")
        );
        let vector = packed(Scalar::F64, 3);
        assert!(
            refused(
                ArrayShape {
                    stride: 16,
                    ..vector
                },
                2,
                at
            )
            .contains("shorter")
        );
        assert!(
            refused(
                ArrayShape {
                    component_stride: 0,
                    ..vector
                },
                2,
                at
            )
            .contains("component stride")
        );
        assert!(View::new(shape, 0, Lent::Interleaved(0)).is_ok());
    }
}
