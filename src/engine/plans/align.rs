//! Renaming the members of a class so that a plan looks like an earlier one: the count
//! stays, far fewer pieces relocate.

use super::{Assignment, NONE};
use crate::engine::{Problem, Reference};
use std::collections::HashMap;

/// The same plan with members of each class exchanged, greedily by how many pieces agree.
pub(crate) fn align(problem: &Problem, on: &mut Assignment, reference: &Reference) {
    let mut agree: HashMap<(u32, u32), u32> = HashMap::new();
    for (now, before) in on.iter().zip(&reference.kept) {
        if *now != NONE
            && before.resource != NONE
            && problem.class_of[*now as usize] == problem.class_of[before.resource as usize]
        {
            *agree.entry((*now, before.resource)).or_default() += 1;
        }
    }
    let mut pairs: Vec<((u32, u32), u32)> = agree.into_iter().collect();
    pairs.sort_unstable_by_key(|((now, before), count)| (std::cmp::Reverse(*count), *now, *before));
    let count = problem.resources.len();
    let (mut new_name, mut taken) = (vec![NONE; count], vec![false; count]);
    for ((now, before), _) in pairs {
        if new_name[now as usize] == NONE && !taken[before as usize] {
            new_name[now as usize] = before;
            taken[before as usize] = true;
        }
    }
    // Whatever found no namesake keeps its name or takes the next free one of its class.
    for class in &problem.classes {
        for member in &class.members {
            if new_name[*member as usize] == NONE && !taken[*member as usize] {
                new_name[*member as usize] = *member;
                taken[*member as usize] = true;
            }
        }
        let mut free = class
            .members
            .iter()
            .filter(|member| !taken[**member as usize]);
        for member in &class.members {
            if new_name[*member as usize] == NONE
                && let Some(name) = free.next()
            {
                new_name[*member as usize] = *name;
            }
        }
    }
    for resource in on.iter_mut().filter(|resource| **resource != NONE) {
        *resource = new_name[*resource as usize];
    }
}
