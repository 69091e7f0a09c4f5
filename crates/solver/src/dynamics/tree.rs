//! The normal tree, and ways through it.

use super::{DynamicsError, Kind, Part};
use crate::circuit::Circuit;
use smallvec::{SmallVec, smallvec};

/// A list that is short for any stage and stays on the stack.
pub(super) type List<T> = SmallVec<[T; 16]>;

/// Tree positions with signs along a way.
pub(super) type Steps = SmallVec<[(usize, f64); 8]>;

/// A spanning tree that prefers sources, then capacitors, then resistors, then coils.
pub(super) struct Tree {
    /// Parts in the tree, in the order of their kinds.
    pub(super) tree: List<usize>,
    /// Parts outside it, in the order of their kinds, each with the tree parts (as positions
    /// in `tree`) along its path and the sign of each voltage in its own.
    pub(super) links: List<(usize, Steps)>,
    /// Ways through the tree.
    pub(super) routes: Routes,
}

impl Tree {
    pub(super) fn grow(circuit: &Circuit, parts: &[Part]) -> Result<Self, DynamicsError> {
        let nodes = node_count(parts);
        let mut group: List<usize> = (0..nodes).collect();
        let (mut tree, mut outside) = (List::new(), List::new());
        for kind in [
            Kind::Source,
            Kind::Capacitor,
            Kind::Resistor,
            Kind::Inductor,
            Kind::Fall,
        ] {
            for (k, part) in parts
                .iter()
                .enumerate()
                .filter(|(_, part)| part.kind == kind)
            {
                let (a, b) = (group[part.from], group[part.to]);
                if a == b {
                    outside.push(k);
                } else if kind == Kind::Fall {
                    // A current with no way back.
                    return Err(DynamicsError::Singular {
                        element: circuit.branches[part.branch].name,
                    });
                } else {
                    group.iter_mut().filter(|g| **g == b).for_each(|g| *g = a);
                    tree.push(k);
                }
            }
        }
        let routes = Routes::of(parts, &tree, nodes);
        let mut links = List::new();
        for link in outside {
            let steps = routes.between(parts[link].from, parts[link].to);
            if parts[link].kind == Kind::Source {
                let mut elements = vec![circuit.branches[parts[link].branch].name];
                elements.extend(
                    steps
                        .iter()
                        .map(|&(t, _)| circuit.branches[parts[tree[t]].branch].name),
                );
                return Err(DynamicsError::SourceLoop { elements });
            }
            links.push((link, steps));
        }
        Ok(Self {
            tree,
            links,
            routes,
        })
    }
}

fn node_count(parts: &[Part]) -> usize {
    parts.iter().map(|p| p.from.max(p.to)).max().unwrap_or(0) + 1
}

/// The tree seen from its roots: each node's way up.
pub(super) struct Routes {
    /// Parent node, tree position and sign of the step up; none at a root.
    up: List<Option<(usize, usize, f64)>>,
    depth: List<usize>,
}

impl Routes {
    fn of(parts: &[Part], tree: &[usize], nodes: usize) -> Self {
        let mut up = smallvec![None; nodes];
        let mut depth: List<usize> = smallvec![usize::MAX; nodes];
        let mut queue: List<usize> = List::new();
        for root in 0..nodes {
            if depth[root] != usize::MAX {
                continue;
            }
            depth[root] = 0;
            queue.clear();
            queue.push(root);
            let mut head = 0;
            while head < queue.len() {
                let node = queue[head];
                head += 1;
                for (t, &part) in tree.iter().enumerate() {
                    let part = &parts[part];
                    // The voltage of the lower node against the upper one.
                    let (other, sign) = if part.from == node {
                        (part.to, -1.0)
                    } else if part.to == node {
                        (part.from, 1.0)
                    } else {
                        continue;
                    };
                    if depth[other] == usize::MAX {
                        depth[other] = depth[node] + 1;
                        up[other] = Some((node, t, sign));
                        queue.push(other);
                    }
                }
            }
        }
        Self { up, depth }
    }

    /// Number of nodes.
    pub(super) fn nodes(&self) -> usize {
        self.depth.len()
    }

    /// Tree positions on the way between two nodes, each with the sign of its voltage in the
    /// voltage of `from` against `to`; what is reached where the two are not connected.
    pub(super) fn between(&self, mut from: usize, mut to: usize) -> Steps {
        let mut steps = Steps::new();
        while from != to {
            let lower = self.depth[from] >= self.depth[to];
            let node = if lower { from } else { to };
            let Some((parent, t, sign)) = self.up[node] else {
                break;
            };
            steps.push((t, if lower { sign } else { -sign }));
            if lower {
                from = parent;
            } else {
                to = parent;
            }
        }
        steps
    }
}
