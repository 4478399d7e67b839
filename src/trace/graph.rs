//! From a skeleton to a graph: nodes where it ends or branches, and between them chains of pixels in order.
//!
//! Method: pixels are linked by mixed adjacency (Rosenfeld & Kak, Digital Picture Processing, 1982): along rows and columns, and
//! diagonally only where no pixel next to both is set, so that a corner of a staircase is no branching. Pixels with other than two
//! links, and full 2×2 blocks, are node pixels; those of branchings that hang together make one node. Work past one scan of the mask is
//! proportional to the skeleton's pixels.
//!
//! Limits: the mask should be thin; a wide region becomes one node. A ring all of whose pixels are branchings becomes one node too.

pub mod distance;
mod length;
mod prune;

use std::collections::{HashMap, HashSet};

use ndarray::ArrayView2;

use super::thin::NEIGHBOURS;

/// A pixel as [row, column].
pub type Pixel = [usize; 2];

/// Place of a node in [`SkeletonGraph::nodes`].
pub type NodeId = usize;

/// An end, a branching, the first pixel of a ring, or a pixel on its own.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Node {
    /// Its pixels in row-major order; more than one where branching pixels touch.
    pub pixels: Vec<Pixel>,
}

impl Node {
    /// Mean of its pixels' centres, [row, column], px.
    #[must_use]
    pub fn centre(&self) -> [f64; 2] {
        let mean =
            |axis: usize| self.pixels.iter().map(|pixel| pixel[axis] as f64).sum::<f64>() / self.pixels.len() as f64;
        [mean(0), mean(1)]
    }
}

/// A run of skeleton pixels between two nodes.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Chain {
    /// At least two pixels, each an 8-neighbour of the one before. The first belongs to `start`, the last to `end`; a ring repeats its
    /// first pixel as its last.
    pub pixels: Vec<Pixel>,
    /// The node of the first pixel.
    pub start: NodeId,
    /// The node of the last pixel.
    pub end: NodeId,
}

/// The graph of a skeleton. Nodes stand in row-major order of their first pixel; chains in the order of their pixels, each turned so that
/// it starts at the lower of its two ends.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct SkeletonGraph {
    /// Ends, branchings, rings' first pixels and single pixels.
    pub nodes: Vec<Node>,
    /// What runs between them.
    pub chains: Vec<Chain>,
}

impl SkeletonGraph {
    /// Reads the graph off a skeleton (true = skeleton), such as [`thin`](super::thin::thin) makes.
    ///
    /// # Examples
    /// ```
    /// use ndarray::Array2;
    /// use veerlog::trace::graph::SkeletonGraph;
    /// let mut skeleton = Array2::from_elem((7, 9), false);
    /// (0..9).for_each(|column| skeleton[[3, column]] = true);
    /// (4..7).for_each(|row| skeleton[[row, 4]] = true);
    /// let graph = SkeletonGraph::from_mask(skeleton.view());
    /// assert_eq!((graph.nodes.len(), graph.chains.len()), (4, 3)); // three ends, one branching
    /// ```
    #[must_use]
    pub fn from_mask(mask: ArrayView2<'_, bool>) -> Self {
        let skeleton = Skeleton { mask };
        let pixels: Vec<Pixel> =
            mask.indexed_iter().filter(|(_, on)| **on).map(|((row, column), _)| [row, column]).collect();
        let mut graph = Self { nodes: skeleton.nodes(&pixels), chains: Vec::new() };
        let mut owner = graph.owners();
        graph.chains = graph.nodes.iter().flat_map(|node| skeleton.chains_from(node, &owner)).collect();

        let mut seen: HashSet<Pixel> = graph.chains.iter().flat_map(|chain| chain.pixels.iter().copied()).collect();
        for &first in &pixels {
            if !owner.contains_key(&first) && !seen.contains(&first) {
                owner.insert(first, graph.nodes.len());
                graph.nodes.push(Node { pixels: vec![first] });
                let ring = skeleton.chains_from(&Node { pixels: vec![first] }, &owner);
                seen.extend(ring.iter().flat_map(|chain| chain.pixels.iter().copied()));
                graph.chains.extend(ring);
            }
        }
        graph.join_through_nodes();
        graph
    }

    /// Number of chain ends at each node: 0 for a pixel on its own, 1 for an end, 2 only for a ring, 3 or more for a branching.
    #[must_use]
    pub fn degrees(&self) -> Vec<usize> {
        let mut degrees = vec![0; self.nodes.len()];
        for chain in &self.chains {
            degrees[chain.start] += 1;
            degrees[chain.end] += 1;
        }
        degrees
    }

    fn owners(&self) -> HashMap<Pixel, NodeId> {
        let owned = |(id, node): (NodeId, &Node)| node.pixels.iter().map(|&pixel| (pixel, id)).collect::<Vec<_>>();
        self.nodes.iter().enumerate().flat_map(owned).collect()
    }
}

/// Whether two pixels touch, corner to corner included.
fn touch(a: Pixel, b: Pixel) -> bool {
    a != b && a[0].abs_diff(b[0]) <= 1 && a[1].abs_diff(b[1]) <= 1
}

/// A skeleton's pixels and the links between them.
struct Skeleton<'a> {
    mask: ArrayView2<'a, bool>,
}

impl Skeleton<'_> {
    fn on(&self, pixel: Pixel) -> bool {
        self.mask.get(pixel) == Some(&true)
    }

    fn linked(&self, [row, column]: Pixel) -> impl Iterator<Item = Pixel> {
        NEIGHBOURS.into_iter().filter_map(move |(down, right)| {
            let (next_row, next_column) = (row.wrapping_add_signed(down), column.wrapping_add_signed(right));
            let diagonal = down != 0 && right != 0;
            let bridged = diagonal && (self.on([row, next_column]) || self.on([next_row, column]));
            (self.on([next_row, next_column]) && !bridged).then_some([next_row, next_column])
        })
    }

    fn branches(&self, pixel: Pixel) -> bool {
        self.linked(pixel).nth(2).is_some() || self.in_block(pixel)
    }

    fn in_block(&self, [row, column]: Pixel) -> bool {
        [(-1, -1), (-1, 1), (1, -1), (1, 1)].into_iter().any(|(down, right)| {
            let (next_row, next_column) = (row.wrapping_add_signed(down), column.wrapping_add_signed(right));
            self.on([next_row, column]) && self.on([row, next_column]) && self.on([next_row, next_column])
        })
    }

    /// Ends, single pixels, and branching pixels gathered where they are linked.
    fn nodes(&self, pixels: &[Pixel]) -> Vec<Node> {
        let mut taken = HashSet::new();
        let mut nodes = Vec::new();
        for &first in pixels {
            if self.branches(first) {
                let mut cluster = Vec::new();
                let mut waiting = vec![first];
                while let Some(pixel) = waiting.pop() {
                    if taken.insert(pixel) {
                        cluster.push(pixel);
                        waiting.extend(self.linked(pixel).filter(|&next| self.branches(next)));
                    }
                }
                cluster.sort_unstable();
                nodes.extend((!cluster.is_empty()).then_some(Node { pixels: cluster }));
            } else if self.linked(first).count() < 2 {
                nodes.push(Node { pixels: vec![first] });
            }
        }
        nodes
    }

    /// The chains that leave a node, each only as seen from the lower of its two ends.
    fn chains_from(&self, node: &Node, owner: &HashMap<Pixel, NodeId>) -> Vec<Chain> {
        let exits = node.pixels.iter().flat_map(|&from| self.linked(from).map(move |to| (from, to)));
        let leaves = exits.filter(|(_, to)| !node.pixels.contains(to));
        leaves.filter_map(|(from, to)| self.walk(from, to, owner)).collect()
    }

    fn walk(&self, first: Pixel, second: Pixel, owner: &HashMap<Pixel, NodeId>) -> Option<Chain> {
        let mut pixels = vec![first, second];
        let (mut before, mut at) = (first, second);
        while !owner.contains_key(&at) {
            let next = self.linked(at).find(|&next| next != before)?;
            (before, at) = (at, next);
            pixels.push(at);
        }
        let lower = [first, second] <= [at, before];
        lower.then_some(Chain { pixels, start: owner[&first], end: owner[&at] })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::trace::{thin::thin, threshold::for_each_component};
    use ndarray::Array2;
    use proptest::prelude::*;

    fn drawn(rows: &[&str]) -> Array2<bool> {
        Array2::from_shape_fn((rows.len(), rows[0].len()), |(row, column)| rows[row].as_bytes()[column] == b'#')
    }

    fn graph(rows: &[&str]) -> SkeletonGraph {
        SkeletonGraph::from_mask(drawn(rows).view())
    }

    #[test]
    fn nothing_a_pixel_and_a_pair() {
        assert_eq!(SkeletonGraph::from_mask(Array2::from_elem((0, 0), true).view()), SkeletonGraph::default());
        let single = graph(&["...", ".#.", "..."]);
        assert_eq!((single.nodes.len(), single.chains.len()), (1, 0));
        let pair = graph(&["#.", ".#"]);
        assert_eq!(pair.chains, [Chain { pixels: vec![[0, 0], [1, 1]], start: 0, end: 1 }]);
        let block = graph(&["##", "##"]);
        assert_eq!((block.nodes.len(), block.nodes[0].pixels.len(), block.chains.len()), (1, 4, 0));
    }

    #[test]
    fn a_staircase_is_one_chain() {
        let stairs = graph(&["##...", ".##..", "..##.", "...##"]);
        assert_eq!((stairs.nodes.len(), stairs.chains.len(), stairs.chains[0].pixels.len()), (2, 1, 8));
    }

    #[test]
    fn a_ring_is_a_chain_that_closes() {
        let ring = graph(&[".##.", "#..#", "#..#", ".##."]);
        assert_eq!((ring.nodes.len(), ring.chains.len(), ring.degrees()), (1, 1, vec![2]));
        let pixels = &ring.chains[0].pixels;
        assert_eq!((pixels.len(), pixels[0]), (9, *pixels.last().unwrap()));
    }

    #[test]
    fn a_ring_on_a_stem_is_kept() {
        let lollipop = graph(&["..#..", ".#.#.", "..#..", "..#..", "..#.."]);
        assert_eq!((lollipop.nodes.len(), lollipop.chains.len()), (2, 2));
        assert!(lollipop.chains.iter().any(|chain| chain.start == chain.end && chain.pixels.len() == 5));
    }

    #[test]
    fn two_lines_cross_in_one_node() {
        let cross = graph(&["#...#", ".#.#.", "..#..", ".#.#.", "#...#"]);
        assert_eq!((cross.nodes.len(), cross.chains.len(), cross.degrees().into_iter().max()), (5, 4, Some(4)));
    }

    fn skeletons() -> impl Strategy<Value = Array2<bool>> {
        (1_usize..18, 1_usize..18).prop_flat_map(|shape| {
            proptest::collection::vec(prop::bool::weighted(0.5), shape.0 * shape.1)
                .prop_map(move |pixels| thin(Array2::from_shape_vec(shape, pixels).unwrap().view()))
        })
    }

    /// Number of parts of the graph that hang together.
    fn parts(graph: &SkeletonGraph) -> usize {
        let mut part: Vec<usize> = (0..graph.nodes.len()).collect();
        for _ in 0..graph.nodes.len() {
            for chain in &graph.chains {
                let least = part[chain.start].min(part[chain.end]);
                (part[chain.start], part[chain.end]) = (least, least);
            }
        }
        part.iter().enumerate().filter(|&(id, &least)| id == least).count()
    }

    proptest! {
        #[test]
        fn chains_are_whole_and_cover_the_skeleton(skeleton in skeletons()) {
            let graph = SkeletonGraph::from_mask(skeleton.view());
            let mut covered = Array2::from_elem(skeleton.dim(), false);
            for node in &graph.nodes {
                node.pixels.iter().for_each(|&pixel| covered[pixel] = true);
            }
            for chain in &graph.chains {
                prop_assert!(chain.pixels.windows(2).all(|pair| touch(pair[0], pair[1])));
                prop_assert!(graph.nodes[chain.start].pixels.contains(&chain.pixels[0]));
                prop_assert!(graph.nodes[chain.end].pixels.contains(chain.pixels.last().unwrap()));
                chain.pixels.iter().for_each(|&pixel| covered[pixel] = true);
                let distinct: HashSet<_> = chain.pixels.iter().collect();
                prop_assert!(distinct.len() + usize::from(chain.start == chain.end) >= chain.pixels.len());
            }
            let lost = skeleton.iter().zip(&covered).filter(|(on, seen)| **on && !**seen).count();
            prop_assert!(covered.iter().zip(&skeleton).all(|(seen, on)| *on || !seen));
            // Only a block passed straight through may shed pixels beside the way.
            let blocks = skeleton.windows((2, 2)).into_iter().filter(|block| block.iter().all(|&on| on)).count();
            prop_assert!(lost <= 2 * blocks);
            let mut components = 0;
            for_each_component(skeleton.view(), |_| components += 1);
            prop_assert_eq!(parts(&graph), components);
        }

        #[test]
        fn a_node_has_two_chain_ends_only_on_a_ring(skeleton in skeletons()) {
            let graph = SkeletonGraph::from_mask(skeleton.view());
            for (id, _) in graph.degrees().iter().enumerate().filter(|(_, degree)| **degree == 2) {
                prop_assert!(graph.chains.iter().any(|chain| chain.start == id && chain.end == id));
            }
            prop_assert!(graph.nodes.is_sorted_by_key(|node| &node.pixels));
            prop_assert!(graph.chains.is_sorted_by_key(|chain| &chain.pixels));
        }

        /// Euler's formula: one part with one ring has as many chains as nodes.
        #[test]
        fn one_ring_has_as_many_chains_as_nodes(size in 3_usize..12, stem in 0_usize..5) {
            let mask = Array2::from_shape_fn((size + stem, size), |(row, column)| {
                let inside = row < size && (row == 0 || column == 0 || row == size - 1 || column == size - 1);
                inside || (row >= size && column == size / 2)
            });
            let graph = SkeletonGraph::from_mask(thin(mask.view()).view());
            prop_assert_eq!(graph.chains.len(), graph.nodes.len());
        }
    }
}
